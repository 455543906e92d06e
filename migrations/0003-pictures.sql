-- What figures need beyond the numbers of the tables. An analysis made before this has none of it.
CREATE TABLE preview (
  analysis_id INTEGER NOT NULL,
  frame INTEGER NOT NULL,
  channel TEXT NOT NULL CHECK (channel IN ('amplitude', 'phase', 'topography')),
  image_rows INTEGER NOT NULL CHECK (image_rows > 0),
  image_cols INTEGER NOT NULL CHECK (image_cols > 0),
  step_x INTEGER NOT NULL CHECK (step_x > 0),
  step_y INTEGER NOT NULL CHECK (step_y > 0),
  -- value of code 0 and of code 255: amplitude over the frame's gain, phase in rad from the insulating state, topography in nm
  low REAL NOT NULL,
  high REAL NOT NULL CHECK (high > low),
  -- lossless WebP: the code in every colour, alpha 0 where not measured
  image BLOB NOT NULL,
  PRIMARY KEY (analysis_id, frame, channel),
  FOREIGN KEY (analysis_id, frame) REFERENCES frame (analysis_id, frame) ON DELETE CASCADE
) STRICT;

-- The pixels of a profile in bins of distance, and the curve fitted to them.
CREATE TABLE profile_bins (
  analysis_id INTEGER NOT NULL,
  frame INTEGER NOT NULL,
  wall INTEGER NOT NULL,
  profile INTEGER NOT NULL,
  -- the fitted curve: half (1 + tanh(d/w)) blurred by a Gaussian of this sigma
  w_nm REAL NOT NULL CHECK (w_nm >= 0),
  sigma_nm REAL NOT NULL CHECK (sigma_nm >= 0),
  -- little-endian float32, in turn: signed distance nm, share of the metallic signal, its standard deviation
  bins BLOB NOT NULL CHECK (length(bins) % 12 = 0),
  PRIMARY KEY (analysis_id, frame, wall, profile),
  FOREIGN KEY (analysis_id, frame, wall, profile) REFERENCES profile (analysis_id, frame, wall, profile) ON DELETE CASCADE
) STRICT, WITHOUT ROWID;

-- The signal beside a stretch of wall that was tested for a fringe, in units of the frame's insulating level.
CREATE TABLE fringe_bins (
  analysis_id INTEGER NOT NULL,
  frame INTEGER NOT NULL,
  wall INTEGER NOT NULL,
  stretch INTEGER NOT NULL,
  metallic_re REAL NOT NULL,
  metallic_im REAL NOT NULL,
  -- little-endian float32, in turn: signed distance nm; mean signal re, im; sd of its phase rad; null re, im; fit re, im
  bins BLOB NOT NULL CHECK (length(bins) % 32 = 0),
  PRIMARY KEY (analysis_id, frame, wall, stretch),
  FOREIGN KEY (analysis_id, frame, wall, stretch) REFERENCES fringe (analysis_id, frame, wall, stretch) ON DELETE CASCADE
) STRICT, WITHOUT ROWID;

-- Pairs of frames whose shift was measured.
CREATE TABLE drift_pair (
  analysis_id INTEGER NOT NULL,
  reference INTEGER NOT NULL,
  moving INTEGER NOT NULL,
  x_nm REAL NOT NULL,
  y_nm REAL NOT NULL,
  sd_x_nm REAL NOT NULL CHECK (sd_x_nm >= 0),
  sd_y_nm REAL NOT NULL CHECK (sd_y_nm >= 0),
  used INTEGER NOT NULL CHECK (used IN (0, 1)),
  PRIMARY KEY (analysis_id, reference, moving),
  FOREIGN KEY (analysis_id, reference) REFERENCES frame (analysis_id, frame) ON DELETE CASCADE,
  FOREIGN KEY (analysis_id, moving) REFERENCES frame (analysis_id, frame) ON DELETE CASCADE
) STRICT, WITHOUT ROWID;
