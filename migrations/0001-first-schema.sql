-- One row a cooldown; a name stands once in a file.
CREATE TABLE cooldown (
  id INTEGER PRIMARY KEY,
  name TEXT NOT NULL UNIQUE CHECK (length(name) > 0),
  sample TEXT NOT NULL CHECK (length(sample) > 0),
  region TEXT
) STRICT;

-- One row a finished analysis; several may stand beside each other for one cooldown, the newest answers unless told otherwise.
CREATE TABLE analysis (
  id INTEGER PRIMARY KEY,
  cooldown_id INTEGER NOT NULL REFERENCES cooldown (id) ON DELETE CASCADE,
  made_at TEXT NOT NULL,
  program_version TEXT NOT NULL,
  settings_json TEXT NOT NULL CHECK (json_valid(settings_json)),
  description_json TEXT NOT NULL CHECK (json_valid(description_json)),
  content_sha256 TEXT NOT NULL CHECK (length(content_sha256) = 64),
  work_sha256 TEXT NOT NULL UNIQUE CHECK (length(work_sha256) = 64),
  pixel_x_nm REAL NOT NULL CHECK (pixel_x_nm > 0),
  pixel_y_nm REAL NOT NULL CHECK (pixel_y_nm > 0),
  tip_resolution_nm REAL CHECK (tip_resolution_nm > 0),
  tip_resolution_sd_nm REAL CHECK (tip_resolution_sd_nm >= 0)
) STRICT;
CREATE INDEX analysis_by_cooldown ON analysis (cooldown_id, id);

CREATE TABLE source (
  analysis_id INTEGER NOT NULL REFERENCES analysis (id) ON DELETE CASCADE,
  path TEXT NOT NULL,
  sha256 TEXT NOT NULL CHECK (length(sha256) = 64),
  bytes INTEGER NOT NULL CHECK (bytes >= 0),
  PRIMARY KEY (analysis_id, path)
) STRICT, WITHOUT ROWID;

CREATE TABLE notice (
  id INTEGER PRIMARY KEY,
  analysis_id INTEGER NOT NULL REFERENCES analysis (id) ON DELETE CASCADE,
  frame INTEGER,
  code TEXT NOT NULL,
  message TEXT NOT NULL
) STRICT;
CREATE INDEX notice_by_analysis ON notice (analysis_id, frame);

CREATE TABLE frame (
  analysis_id INTEGER NOT NULL REFERENCES analysis (id) ON DELETE CASCADE,
  frame INTEGER NOT NULL CHECK (frame >= 0),
  branch TEXT NOT NULL CHECK (branch IN ('cooling', 'warming')),
  cycle INTEGER NOT NULL CHECK (cycle >= 1),
  temperature_k REAL NOT NULL CHECK (temperature_k > 0),
  started_at TEXT,
  ended_at TEXT,
  drift_x_nm REAL,
  drift_y_nm REAL,
  drift_sd_nm REAL CHECK (drift_sd_nm >= 0),
  verdict TEXT NOT NULL CHECK (verdict IN ('mixed', 'metallic', 'insulating', 'undecided')),
  metallic_fraction REAL CHECK (metallic_fraction BETWEEN 0 AND 1),
  metallic_fraction_low REAL CHECK (metallic_fraction_low BETWEEN 0 AND 1),
  metallic_fraction_high REAL CHECK (metallic_fraction_high BETWEEN 0 AND 1),
  amplitude_insulating REAL,
  amplitude_metallic REAL,
  gain REAL NOT NULL CHECK (gain > 0),
  metallic_domains INTEGER CHECK (metallic_domains >= 0),
  insulating_domains INTEGER CHECK (insulating_domains >= 0),
  wall_length_nm REAL CHECK (wall_length_nm >= 0),
  profiles INTEGER NOT NULL CHECK (profiles >= 0),
  wall_width_median_nm REAL CHECK (wall_width_median_nm >= 0),
  wall_width_median_low_nm REAL,
  wall_width_median_high_nm REAL,
  unresolved_share REAL CHECK (unresolved_share BETWEEN 0 AND 1),
  fringe_share REAL CHECK (fringe_share BETWEEN 0 AND 1),
  flag TEXT NOT NULL,
  usable_pixels INTEGER NOT NULL CHECK (usable_pixels >= 0),
  debris_pixels INTEGER NOT NULL CHECK (debris_pixels >= 0),
  scar_pixels INTEGER NOT NULL CHECK (scar_pixels >= 0),
  map_rows INTEGER NOT NULL,
  map_cols INTEGER NOT NULL,
  -- deflated bytes, row-major: 0 insulating, 1 metallic, 255 neither
  map_deflated BLOB NOT NULL,
  PRIMARY KEY (analysis_id, frame),
  CHECK ((metallic_fraction IS NULL) = (metallic_fraction_low IS NULL)),
  CHECK ((metallic_fraction IS NULL) = (metallic_fraction_high IS NULL)),
  CHECK (metallic_fraction IS NULL OR (metallic_fraction_low <= metallic_fraction AND metallic_fraction <= metallic_fraction_high)),
  CHECK ((verdict = 'undecided') = (metallic_fraction IS NULL)),
  CHECK ((drift_x_nm IS NULL) = (drift_y_nm IS NULL) AND (drift_x_nm IS NULL) = (drift_sd_nm IS NULL)),
  CHECK (wall_width_median_nm IS NULL OR unresolved_share <= 0.5)
) STRICT, WITHOUT ROWID;

CREATE TABLE wall (
  analysis_id INTEGER NOT NULL,
  frame INTEGER NOT NULL,
  wall INTEGER NOT NULL CHECK (wall >= 0),
  closed INTEGER NOT NULL CHECK (closed IN (0, 1)),
  length_nm REAL NOT NULL CHECK (length_nm >= 0),
  -- little-endian float32, x and y in turn, nm in the frame (no drift added)
  points BLOB NOT NULL,
  PRIMARY KEY (analysis_id, frame, wall),
  FOREIGN KEY (analysis_id, frame) REFERENCES frame (analysis_id, frame) ON DELETE CASCADE
) STRICT, WITHOUT ROWID;

-- Positions are kept in the frame; the views add the drift.
CREATE TABLE profile (
  analysis_id INTEGER NOT NULL,
  frame INTEGER NOT NULL,
  wall INTEGER NOT NULL,
  profile INTEGER NOT NULL CHECK (profile >= 0),
  x_nm REAL NOT NULL,
  y_nm REAL NOT NULL,
  normal_deg REAL NOT NULL,
  arc_nm REAL NOT NULL,
  stretch_nm REAL NOT NULL,
  width_nm REAL CHECK (width_nm > 0),
  width_sd_nm REAL CHECK (width_sd_nm >= 0),
  width_sd_tip_nm REAL CHECK (width_sd_tip_nm >= 0),
  width_upper95_nm REAL CHECK (width_upper95_nm > 0),
  resolved INTEGER NOT NULL CHECK (resolved IN (0, 1)),
  apparent_width_nm REAL CHECK (apparent_width_nm > 0),
  amplitude_insulating REAL,
  amplitude_metallic REAL,
  reduced_chi2 REAL CHECK (reduced_chi2 >= 0),
  pixels INTEGER NOT NULL CHECK (pixels >= 0),
  flag TEXT NOT NULL,
  PRIMARY KEY (analysis_id, frame, wall, profile),
  FOREIGN KEY (analysis_id, frame, wall) REFERENCES wall (analysis_id, frame, wall) ON DELETE CASCADE,
  CHECK (resolved = (width_nm IS NOT NULL)),
  CHECK (resolved = 1 OR flag <> '' OR width_upper95_nm IS NOT NULL),
  CHECK (width_nm IS NULL OR width_sd_nm IS NOT NULL)
) STRICT, WITHOUT ROWID;

CREATE TABLE fringe (
  analysis_id INTEGER NOT NULL,
  frame INTEGER NOT NULL,
  wall INTEGER NOT NULL,
  stretch INTEGER NOT NULL CHECK (stretch >= 0),
  arc_from_nm REAL NOT NULL,
  arc_to_nm REAL NOT NULL,
  detected INTEGER NOT NULL CHECK (detected IN (0, 1)),
  p_value REAL NOT NULL CHECK (p_value BETWEEN 0 AND 1),
  adjusted_p REAL NOT NULL CHECK (adjusted_p BETWEEN 0 AND 1),
  side TEXT NOT NULL CHECK (side IN ('metallic', 'insulating')),
  contrast_rad REAL,
  contrast_sd_rad REAL CHECK (contrast_sd_rad >= 0),
  offset_nm REAL,
  period_nm REAL CHECK (period_nm > 0),
  period_sd_nm REAL CHECK (period_sd_nm >= 0),
  decay_nm REAL CHECK (decay_nm > 0),
  decay_sd_nm REAL CHECK (decay_sd_nm >= 0),
  PRIMARY KEY (analysis_id, frame, wall, stretch),
  FOREIGN KEY (analysis_id, frame, wall) REFERENCES wall (analysis_id, frame, wall) ON DELETE CASCADE
) STRICT, WITHOUT ROWID;

CREATE TABLE domain (
  analysis_id INTEGER NOT NULL REFERENCES analysis (id) ON DELETE CASCADE,
  domain INTEGER NOT NULL CHECK (domain >= 0),
  kind TEXT NOT NULL CHECK (kind IN ('metallic', 'insulating')),
  origin TEXT NOT NULL CHECK (origin IN ('first-frame', 'nucleated', 'split', 'border')),
  fate TEXT NOT NULL CHECK (fate IN ('last-frame', 'vanished', 'merged', 'border')),
  PRIMARY KEY (analysis_id, domain)
) STRICT, WITHOUT ROWID;

CREATE TABLE domain_appearance (
  analysis_id INTEGER NOT NULL,
  domain INTEGER NOT NULL,
  frame INTEGER NOT NULL,
  area_nm2 REAL NOT NULL CHECK (area_nm2 > 0),
  perimeter_nm REAL CHECK (perimeter_nm >= 0),
  x_nm REAL NOT NULL,
  y_nm REAL NOT NULL,
  touches_border INTEGER NOT NULL CHECK (touches_border IN (0, 1)),
  PRIMARY KEY (analysis_id, domain, frame),
  FOREIGN KEY (analysis_id, domain) REFERENCES domain (analysis_id, domain) ON DELETE CASCADE,
  FOREIGN KEY (analysis_id, frame) REFERENCES frame (analysis_id, frame) ON DELETE CASCADE
) STRICT, WITHOUT ROWID;

CREATE TABLE loop (
  analysis_id INTEGER NOT NULL REFERENCES analysis (id) ON DELETE CASCADE,
  cycle INTEGER NOT NULL CHECK (cycle >= 1),
  cooling_half_k REAL,
  cooling_half_low_k REAL,
  cooling_half_high_k REAL,
  warming_half_k REAL,
  warming_half_low_k REAL,
  warming_half_high_k REAL,
  width_k REAL,
  width_low_k REAL,
  width_high_k REAL,
  area_k REAL,
  lowest_fraction REAL CHECK (lowest_fraction BETWEEN 0 AND 1),
  highest_fraction REAL CHECK (highest_fraction BETWEEN 0 AND 1),
  complete INTEGER NOT NULL CHECK (complete IN (0, 1)),
  PRIMARY KEY (analysis_id, cycle)
) STRICT, WITHOUT ROWID;

-- The exported tables over every analysis (`…_all`) and over the newest of each cooldown.
CREATE VIEW newest_analysis AS
  SELECT max(id) AS id, cooldown_id FROM analysis GROUP BY cooldown_id;

CREATE VIEW temperature_all AS
  SELECT c.name AS cooldown, f.branch, f.cycle, f.frame, f.temperature_k AS temperature_K,
         f.drift_x_nm, f.drift_y_nm, f.drift_sd_nm,
         f.metallic_fraction, f.metallic_fraction_low, f.metallic_fraction_high,
         f.amplitude_insulating, f.amplitude_metallic, f.metallic_domains, f.insulating_domains, f.wall_length_nm,
         f.profiles, f.wall_width_median_nm, f.wall_width_median_low_nm, f.wall_width_median_high_nm,
         f.unresolved_share, f.fringe_share, f.flag,
         f.gain, f.usable_pixels, f.debris_pixels, f.scar_pixels, f.analysis_id AS analysis
  FROM frame f JOIN analysis a ON a.id = f.analysis_id JOIN cooldown c ON c.id = a.cooldown_id;

CREATE VIEW walls_all AS
  SELECT c.name AS cooldown, f.branch, f.cycle, p.frame, f.temperature_k AS temperature_K, p.wall, p.profile,
         p.x_nm + f.drift_x_nm AS x_nm, p.y_nm + f.drift_y_nm AS y_nm, p.normal_deg, p.arc_nm,
         p.width_nm, p.width_sd_nm, p.width_sd_tip_nm, p.width_upper95_nm, p.resolved, p.apparent_width_nm,
         a.tip_resolution_nm, p.amplitude_insulating, p.amplitude_metallic, p.reduced_chi2, p.flag,
         p.stretch_nm, p.pixels, p.analysis_id AS analysis
  FROM profile p JOIN frame f ON f.analysis_id = p.analysis_id AND f.frame = p.frame
  JOIN analysis a ON a.id = p.analysis_id JOIN cooldown c ON c.id = a.cooldown_id;

CREATE VIEW fringes_all AS
  SELECT c.name AS cooldown, f.branch, f.cycle, t.frame, f.temperature_k AS temperature_K, t.wall, t.detected, t.p_value,
         t.side, t.contrast_rad, t.contrast_sd_rad, t.offset_nm, t.period_nm, t.period_sd_nm, t.decay_nm, t.decay_sd_nm,
         t.stretch, t.arc_from_nm, t.arc_to_nm, t.adjusted_p, t.analysis_id AS analysis
  FROM fringe t JOIN frame f ON f.analysis_id = t.analysis_id AND f.frame = t.frame
  JOIN analysis a ON a.id = t.analysis_id JOIN cooldown c ON c.id = a.cooldown_id;

CREATE VIEW domains_all AS
  SELECT c.name AS cooldown, d.domain, d.kind,
         s.first_frame, s.last_frame, ff.temperature_k AS first_temperature_K, fl.temperature_k AS last_temperature_K,
         d.origin, d.fate, s.largest_area_nm2, d.analysis_id AS analysis
  FROM domain d
  JOIN (SELECT analysis_id, domain, min(frame) AS first_frame, max(frame) AS last_frame, max(area_nm2) AS largest_area_nm2
        FROM domain_appearance GROUP BY analysis_id, domain) s ON s.analysis_id = d.analysis_id AND s.domain = d.domain
  JOIN frame ff ON ff.analysis_id = d.analysis_id AND ff.frame = s.first_frame
  JOIN frame fl ON fl.analysis_id = d.analysis_id AND fl.frame = s.last_frame
  JOIN analysis a ON a.id = d.analysis_id JOIN cooldown c ON c.id = a.cooldown_id;

CREATE VIEW domain_frames_all AS
  SELECT c.name AS cooldown, d.domain, d.frame, f.temperature_k AS temperature_K, d.area_nm2, d.perimeter_nm,
         d.x_nm + f.drift_x_nm AS x_nm, d.y_nm + f.drift_y_nm AS y_nm, d.touches_border, d.analysis_id AS analysis
  FROM domain_appearance d JOIN frame f ON f.analysis_id = d.analysis_id AND f.frame = d.frame
  JOIN analysis a ON a.id = d.analysis_id JOIN cooldown c ON c.id = a.cooldown_id;

CREATE VIEW loops_all AS
  SELECT c.name AS cooldown, l.cycle, l.cooling_half_k AS cooling_half_K, l.cooling_half_low_k AS cooling_half_low_K,
         l.cooling_half_high_k AS cooling_half_high_K, l.warming_half_k AS warming_half_K,
         l.warming_half_low_k AS warming_half_low_K, l.warming_half_high_k AS warming_half_high_K,
         l.width_k AS width_K, l.width_low_k AS width_low_K, l.width_high_k AS width_high_K, l.area_k AS area_K,
         l.lowest_fraction, l.highest_fraction, l.complete, l.analysis_id AS analysis
  FROM loop l JOIN analysis a ON a.id = l.analysis_id JOIN cooldown c ON c.id = a.cooldown_id;

CREATE VIEW temperature AS SELECT * FROM temperature_all WHERE analysis IN (SELECT id FROM newest_analysis);
CREATE VIEW walls AS SELECT * FROM walls_all WHERE analysis IN (SELECT id FROM newest_analysis);
CREATE VIEW fringes AS SELECT * FROM fringes_all WHERE analysis IN (SELECT id FROM newest_analysis);
CREATE VIEW domains AS SELECT * FROM domains_all WHERE analysis IN (SELECT id FROM newest_analysis);
CREATE VIEW domain_frames AS SELECT * FROM domain_frames_all WHERE analysis IN (SELECT id FROM newest_analysis);
CREATE VIEW loops AS SELECT * FROM loops_all WHERE analysis IN (SELECT id FROM newest_analysis);
