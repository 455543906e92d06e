-- How the temperature ran during a frame, as the thermometer's log has it, and how noisy its pixels were.
ALTER TABLE frame ADD COLUMN temperature_sd_k REAL CHECK (temperature_sd_k >= 0);
ALTER TABLE frame ADD COLUMN ramp_k_per_s REAL;
ALTER TABLE frame ADD COLUMN lag_shift_k REAL;
ALTER TABLE frame ADD COLUMN amplitude_noise_relative REAL CHECK (amplitude_noise_relative >= 0);
ALTER TABLE frame ADD COLUMN phase_noise_rad REAL CHECK (phase_noise_rad >= 0);
ALTER TABLE frame ADD COLUMN topography_noise_nm REAL CHECK (topography_noise_nm >= 0);
-- channels, separated by blanks; NULL in an analysis made before this
ALTER TABLE frame ADD COLUMN noise_by_retrace TEXT;

-- Analyses made before have the log's temperatures in their description; of the noise they kept nothing.
UPDATE frame SET
  temperature_sd_k = (SELECT a.description_json ->> ('$.frames[' || frame.frame || '].temperatureSdK') FROM analysis a WHERE a.id = frame.analysis_id),
  ramp_k_per_s = (SELECT a.description_json ->> ('$.frames[' || frame.frame || '].rampKPerS') FROM analysis a WHERE a.id = frame.analysis_id),
  lag_shift_k = (SELECT a.description_json ->> ('$.frames[' || frame.frame || '].lagShiftK') FROM analysis a WHERE a.id = frame.analysis_id);

DROP VIEW temperature;
DROP VIEW temperature_all;
CREATE VIEW temperature_all AS
  SELECT c.name AS cooldown, f.branch, f.cycle, f.frame, f.temperature_k AS temperature_K,
         f.drift_x_nm, f.drift_y_nm, f.drift_sd_nm,
         f.metallic_fraction, f.metallic_fraction_low, f.metallic_fraction_high,
         f.amplitude_insulating, f.amplitude_metallic, f.metallic_domains, f.insulating_domains, f.wall_length_nm,
         f.profiles, f.wall_width_median_nm, f.wall_width_median_low_nm, f.wall_width_median_high_nm,
         f.unresolved_share, f.fringe_share, f.flag,
         f.gain, f.usable_pixels, f.debris_pixels, f.scar_pixels, f.analysis_id AS analysis,
         f.temperature_sd_k AS temperature_sd_K, f.ramp_k_per_s AS ramp_K_per_s, f.lag_shift_k AS lag_shift_K,
         f.amplitude_noise_relative, f.phase_noise_rad, f.topography_noise_nm, f.noise_by_retrace
  FROM frame f JOIN analysis a ON a.id = f.analysis_id JOIN cooldown c ON c.id = a.cooldown_id;
CREATE VIEW temperature AS SELECT * FROM temperature_all WHERE analysis IN (SELECT id FROM newest_analysis);
