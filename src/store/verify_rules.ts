/** Something that rows owe each other: a statement that gives a line of text for every place where they do not. */
export interface Rule {
  readonly name: string;
  /** What `from` counts. */
  readonly of: string;
  readonly from: string;
  /** May use `place (id, name)` of PLACES: an analysis and its name for people. */
  readonly wrong: string;
}

export const PLACES = `place AS (
  SELECT a.id, c.name || ', analysis ' || a.id AS name FROM analysis a JOIN cooldown c ON c.id = a.cooldown_id)`;

/** The line of a frame: where it is, then what is wrong there. */
const frameLine = (text: string, f = "f"): string =>
  `SELECT place.name || ', frame ' || ${f}.frame || ': ' || ${text} FROM`;
/** A number for people, or "none". */
const shown = (column: string): string => `coalesce(round(${column}, 6), 'none')`;
/** Not equal within rounding of a sum, or only one of the two missing. */
const differ = (a: string, b: string): string =>
  `((${a} IS NULL) <> (${b} IS NULL) OR abs(${a} - ${b}) > 1e-9 * max(1, abs(${a})))`;
const setting = (name: string): string => `json_extract(a.settings_json, '$."${name}"')`;

export const RULES: readonly Rule[] = [
  {
    name: "frames are numbered from 0 without a gap, and are those described",
    of: "analyses",
    from: "analysis",
    wrong: `SELECT place.name || ': ' || count(f.frame) || ' frames up to number ' || coalesce(max(f.frame), 'none')
        || ', ' || json_array_length(a.description_json, '$.frames') || ' described'
      FROM analysis a JOIN place ON place.id = a.id LEFT JOIN frame f ON f.analysis_id = a.id GROUP BY a.id
      HAVING count(f.frame) = 0 OR count(f.frame) <> max(f.frame) + 1
        OR count(f.frame) <> json_array_length(a.description_json, '$.frames')`,
  },
  {
    name: "branch, cycle and temperature are as described",
    of: "frames",
    from: "frame",
    wrong: `${frameLine("f.branch || ', cycle ' || f.cycle || ', ' || f.temperature_k || ' K; described as ' || d.value")}
      frame f JOIN place ON place.id = f.analysis_id JOIN analysis a ON a.id = f.analysis_id
      JOIN json_each(a.description_json, '$.frames') d ON d.key = f.frame
      WHERE f.branch IS NOT d.value ->> '$.branch' OR f.cycle IS NOT d.value ->> '$.cycle'
        OR f.temperature_k IS NOT d.value ->> '$.temperatureK'
        OR f.map_rows IS NOT d.value ->> '$.rows' OR f.map_cols IS NOT d.value ->> '$.cols'`,
  },
  {
    name: "spread, ramp and lag of the temperature are as described; a frame has all three or none",
    of: "frames",
    from: "frame",
    wrong: `${frameLine(`'spread ' || ${shown("f.temperature_sd_k")} || ' K, ramp ' || ${shown("f.ramp_k_per_s")} || ' K/s, lag ' || ${shown("f.lag_shift_k")} || ' K; described as ' || d.value`)}
      frame f JOIN place ON place.id = f.analysis_id JOIN analysis a ON a.id = f.analysis_id
      JOIN json_each(a.description_json, '$.frames') d ON d.key = f.frame
      WHERE f.temperature_sd_k IS NOT d.value ->> '$.temperatureSdK' OR f.ramp_k_per_s IS NOT d.value ->> '$.rampKPerS'
        OR f.lag_shift_k IS NOT d.value ->> '$.lagShiftK' OR f.temperature_sd_k < 0
        OR (f.temperature_sd_k IS NULL) <> (f.ramp_k_per_s IS NULL) OR (f.temperature_sd_k IS NULL) <> (f.lag_shift_k IS NULL)`,
  },
  {
    name: "sample, name and region are as described",
    of: "analyses",
    from: "analysis",
    wrong: `SELECT place.name || ': described as ' || (a.description_json ->> '$.cooldown') || ' of sample ' || (a.description_json ->> '$.sample')
      FROM analysis a JOIN place ON place.id = a.id JOIN cooldown c ON c.id = a.cooldown_id
      WHERE c.name IS NOT a.description_json ->> '$.cooldown' OR c.sample IS NOT a.description_json ->> '$.sample'
        OR c.region IS NOT a.description_json ->> '$.region'`,
  },
  {
    name: "fractions lie in 0 to 1 and in their intervals; none where the state is undecided",
    of: "frames",
    from: "frame",
    wrong: `${frameLine(`f.verdict || ', fraction ' || ${shown("f.metallic_fraction")} || ' in ' || ${shown("f.metallic_fraction_low")} || ' to ' || ${shown("f.metallic_fraction_high")}`)}
      frame f JOIN place ON place.id = f.analysis_id
      WHERE CASE WHEN f.verdict = 'undecided'
        THEN f.metallic_fraction IS NOT NULL OR f.metallic_fraction_low IS NOT NULL OR f.metallic_fraction_high IS NOT NULL
        ELSE (0 <= f.metallic_fraction_low AND f.metallic_fraction_low <= f.metallic_fraction
          AND f.metallic_fraction <= f.metallic_fraction_high AND f.metallic_fraction_high <= 1) IS NOT 1 END`,
  },
  {
    name: "frames are placed wholly or not at all; the first is the origin",
    of: "frames",
    from: "frame",
    wrong: `${frameLine(`'drift ' || ${shown("f.drift_x_nm")} || ', ' || ${shown("f.drift_y_nm")} || ', sd ' || ${shown("f.drift_sd_nm")}`)}
      frame f JOIN place ON place.id = f.analysis_id
      WHERE (f.drift_x_nm IS NULL) <> (f.drift_y_nm IS NULL) OR (f.drift_x_nm IS NULL) <> (f.drift_sd_nm IS NULL)
        OR f.drift_sd_nm < 0 OR (f.frame = 0 AND (f.drift_x_nm <> 0 OR f.drift_y_nm <> 0 OR f.drift_sd_nm <> 0))`,
  },
  {
    name: "a profile is resolved exactly where it has a width; one that is not has a limit or a flag",
    of: "profiles",
    from: "profile",
    wrong: `${frameLine("'wall ' || p.wall || ', profile ' || p.profile || ': resolved ' || p.resolved || ', width ' || coalesce(p.width_nm, 'none')", "p")}
      profile p JOIN place ON place.id = p.analysis_id
      WHERE p.resolved IS NOT (p.width_nm IS NOT NULL) OR p.width_nm <= 0
        OR (p.width_nm IS NOT NULL AND p.width_sd_nm IS NULL)
        OR (p.resolved = 0 AND p.flag = '' AND p.width_upper95_nm IS NULL)`,
  },
  {
    name: "profiles stand on their wall",
    of: "profiles",
    from: "profile",
    wrong: `${frameLine("'wall ' || p.wall || ', profile ' || p.profile || ': at ' || p.arc_nm || ' nm of ' || w.length_nm", "p")}
      profile p JOIN place ON place.id = p.analysis_id
      JOIN wall w ON w.analysis_id = p.analysis_id AND w.frame = p.frame AND w.wall = p.wall
      WHERE NOT (p.arc_nm >= -1e-6 AND p.arc_nm <= w.length_nm + 1e-6)`,
  },
  {
    name: "each frame counts its sound profiles, and the share of them that is unresolved",
    of: "frames",
    from: "frame",
    wrong: `, counted AS (SELECT f.analysis_id, f.frame, f.profiles, f.unresolved_share, count(p.profile) AS n, avg(1 - p.resolved) AS share
        FROM frame f LEFT JOIN profile p ON p.analysis_id = f.analysis_id AND p.frame = f.frame AND p.flag = ''
        GROUP BY f.analysis_id, f.frame)
      ${frameLine(`'says ' || f.profiles || ' profiles, ' || ${shown("f.unresolved_share")} || ' unresolved; has ' || f.n || ', ' || ${shown("f.share")}`)}
      counted f JOIN place ON place.id = f.analysis_id
      WHERE f.profiles <> f.n OR ${differ("f.unresolved_share", "f.share")}`,
  },
  {
    name: "median widths lie in their intervals, and stand only where at most half are limits",
    of: "frames",
    from: "frame",
    wrong: `${frameLine(`'median ' || ${shown("f.wall_width_median_nm")} || ' in ' || ${shown("f.wall_width_median_low_nm")} || ' to ' || ${shown("f.wall_width_median_high_nm")}`)}
      frame f JOIN place ON place.id = f.analysis_id
      WHERE f.wall_width_median_nm < f.wall_width_median_low_nm OR f.wall_width_median_nm > f.wall_width_median_high_nm
        OR (f.wall_width_median_nm IS NOT NULL AND (f.unresolved_share <= 0.5) IS NOT 1)`,
  },
  {
    name: "the length of all walls is the sum of theirs",
    of: "frames",
    from: "frame",
    wrong: `, summed AS (SELECT f.analysis_id, f.frame, f.wall_length_nm, total(w.length_nm) AS length_nm
        FROM frame f LEFT JOIN wall w ON w.analysis_id = f.analysis_id AND w.frame = f.frame GROUP BY f.analysis_id, f.frame)
      ${frameLine("'says ' || f.wall_length_nm || ' nm, its walls make ' || f.length_nm")}
      summed f JOIN place ON place.id = f.analysis_id
      WHERE f.wall_length_nm IS NOT NULL AND ${differ("f.wall_length_nm", "f.length_nm")}`,
  },
  {
    name: "fringes: probabilities in 0 to 1, raised by the control over the cooldown, never lowered",
    of: "stretches",
    from: "fringe",
    wrong: `${frameLine("'wall ' || t.wall || ', stretch ' || t.stretch || ': p ' || t.p_value || ', adjusted ' || t.adjusted_p", "t")}
      fringe t JOIN place ON place.id = t.analysis_id
      WHERE NOT (0 <= t.p_value AND t.p_value <= t.adjusted_p AND t.adjusted_p <= 1 AND t.arc_from_nm <= t.arc_to_nm)`,
  },
  {
    name: "the share of walls with a fringe is that of the stretches tested",
    of: "frames",
    from: "frame",
    wrong: `, shared AS (SELECT f.analysis_id, f.frame, f.fringe_share,
          sum(t.detected * (t.arc_to_nm - t.arc_from_nm)) / nullif(sum(t.arc_to_nm - t.arc_from_nm), 0) AS share
        FROM frame f LEFT JOIN fringe t ON t.analysis_id = f.analysis_id AND t.frame = f.frame GROUP BY f.analysis_id, f.frame)
      ${frameLine(`'says ' || ${shown("f.fringe_share")} || ', its stretches make ' || ${shown("f.share")}`)}
      shared f JOIN place ON place.id = f.analysis_id WHERE ${differ("f.fringe_share", "f.share")}`,
  },
  {
    name: "no frame has more tracked domains than domains",
    of: "frames",
    from: "frame",
    wrong: `, tracked AS (SELECT s.analysis_id, s.frame, total(d.kind = 'metallic') AS m, total(d.kind = 'insulating') AS i
        FROM domain_appearance s JOIN domain d ON d.analysis_id = s.analysis_id AND d.domain = s.domain
        GROUP BY s.analysis_id, s.frame)
      ${frameLine("'tracks ' || t.m || ' metallic and ' || t.i || ' insulating domains of ' || coalesce(f.metallic_domains, 'none') || ' and ' || coalesce(f.insulating_domains, 'none')", "t")}
      tracked t JOIN place ON place.id = t.analysis_id JOIN frame f ON f.analysis_id = t.analysis_id AND f.frame = t.frame
      WHERE (t.m <= f.metallic_domains AND t.i <= f.insulating_domains AND f.drift_x_nm IS NOT NULL) IS NOT 1`,
  },
  {
    name: "each domain appears, and is there at the first or last frame where it says so",
    of: "domains",
    from: "domain",
    wrong: `, life AS (SELECT d.analysis_id, d.domain, d.origin, d.fate, min(s.frame) AS born, max(s.frame) AS gone
        FROM domain d LEFT JOIN domain_appearance s ON s.analysis_id = d.analysis_id AND s.domain = d.domain
        GROUP BY d.analysis_id, d.domain),
      span AS (SELECT analysis_id, min(born) AS first, max(gone) AS last FROM life GROUP BY analysis_id)
      SELECT place.name || ', domain ' || l.domain || ': ' || l.origin || ' at ' || coalesce(l.born, 'none') || ', ' || l.fate || ' at ' || coalesce(l.gone, 'none')
      FROM life l JOIN place ON place.id = l.analysis_id JOIN span s ON s.analysis_id = l.analysis_id
      WHERE l.born IS NULL OR (l.origin = 'first-frame' AND l.born <> s.first) OR (l.fate = 'last-frame' AND l.gone <> s.last)`,
  },
  {
    name: "there is a loop for every cycle, and cycles are numbered from 1",
    of: "loops",
    from: "loop",
    wrong: `, cycles AS (SELECT DISTINCT analysis_id, cycle FROM frame)
      SELECT place.name || ', cycle ' || c.cycle || ': has frames but no loop' FROM cycles c JOIN place ON place.id = c.analysis_id
      WHERE NOT EXISTS (SELECT 1 FROM loop l WHERE l.analysis_id = c.analysis_id AND l.cycle = c.cycle)
      UNION ALL SELECT place.name || ', cycle ' || l.cycle || ': has a loop but no frames' FROM loop l JOIN place ON place.id = l.analysis_id
      WHERE NOT EXISTS (SELECT 1 FROM cycles c WHERE l.analysis_id = c.analysis_id AND l.cycle = c.cycle)
      UNION ALL SELECT place.name || ': ' || count(*) || ' cycles up to number ' || max(c.cycle) FROM cycles c JOIN place ON place.id = c.analysis_id
      GROUP BY c.analysis_id HAVING count(*) <> max(c.cycle) OR min(c.cycle) <> 1`,
  },
  {
    name: "a loop's width is warming less cooling; each number lies in its interval",
    of: "loops",
    from: "loop",
    wrong: `SELECT place.name || ', cycle ' || l.cycle || ': cooling ' || ${shown("l.cooling_half_k")} || ', warming ' || ${shown("l.warming_half_k")} || ', width ' || ${shown("l.width_k")}
      FROM loop l JOIN place ON place.id = l.analysis_id
      WHERE ${differ("l.width_k", "(l.warming_half_k - l.cooling_half_k)")}
      ${["cooling_half", "warming_half", "width"]
        .map(
          (
            c,
          ) => `OR (l.${c}_low_k IS NULL) <> (l.${c}_high_k IS NULL) OR l.${c}_k < l.${c}_low_k OR l.${c}_k > l.${c}_high_k
        OR (l.${c}_k IS NULL AND l.${c}_low_k IS NOT NULL)`,
        )
        .join("\n      ")}`,
  },
  {
    name: "half temperatures lie between the temperatures of their branch",
    of: "loops",
    from: "loop",
    wrong: `, reach AS (SELECT analysis_id, cycle, branch, min(temperature_k) AS low, max(temperature_k) AS high FROM frame
        WHERE metallic_fraction IS NOT NULL GROUP BY analysis_id, cycle, branch),
      halves AS (SELECT analysis_id, cycle, 'cooling' AS branch, cooling_half_k AS half FROM loop
        UNION ALL SELECT analysis_id, cycle, 'warming', warming_half_k FROM loop)
      SELECT place.name || ', cycle ' || h.cycle || ': half temperature ' || round(h.half, 3) || ' K, ' || h.branch || ' from ' || coalesce(r.low, 'none') || ' to ' || coalesce(r.high, 'none')
      FROM halves h JOIN place ON place.id = h.analysis_id
      LEFT JOIN reach r ON r.analysis_id = h.analysis_id AND r.cycle = h.cycle AND r.branch = h.branch
      WHERE h.half IS NOT NULL AND (r.low <= h.half AND h.half <= r.high) IS NOT 1`,
  },
  {
    name: "a loop's extremes are among its fractions; complete ones run from one state to the other",
    of: "loops",
    from: "loop",
    wrong: `, extremes AS (SELECT analysis_id, cycle, min(metallic_fraction) AS low, max(metallic_fraction) AS high,
          count(DISTINCT branch) AS branches FROM frame WHERE metallic_fraction IS NOT NULL GROUP BY analysis_id, cycle)
      SELECT place.name || ', cycle ' || l.cycle || ': ' || ${shown("l.lowest_fraction")} || ' to ' || ${shown("l.highest_fraction")} || ', complete ' || l.complete
        || '; its frames have ' || ${shown("e.low")} || ' to ' || ${shown("e.high")}
      FROM loop l JOIN place ON place.id = l.analysis_id JOIN analysis a ON a.id = l.analysis_id
      LEFT JOIN extremes e ON e.analysis_id = l.analysis_id AND e.cycle = l.cycle
      WHERE (l.lowest_fraction IS NULL) <> (e.low IS NULL) OR (l.highest_fraction IS NULL) <> (e.high IS NULL)
        OR l.lowest_fraction < e.low - 1e-9 OR l.highest_fraction > e.high + 1e-9 OR l.lowest_fraction > l.highest_fraction
        OR (l.complete = 1 AND (e.branches = 2 AND l.lowest_fraction <= ${setting("loops.completeLow")}
          AND l.highest_fraction >= ${setting("loops.completeHigh")}) IS NOT 1)`,
  },
  {
    name: "previews are images, and cover their frames",
    of: "previews",
    from: "preview",
    wrong: `${frameLine("v.channel || ': ' || v.image_rows || ' × ' || v.image_cols || ' boxes of ' || v.step_y || ' × ' || v.step_x || ' for ' || f.map_rows || ' × ' || f.map_cols || ' pixels'")}
      preview v JOIN place ON place.id = v.analysis_id JOIN frame f ON f.analysis_id = v.analysis_id AND f.frame = v.frame
      WHERE hex(substr(v.image, 1, 4)) <> hex('RIFF') OR v.image_rows * v.step_y < f.map_rows OR v.image_cols * v.step_x < f.map_cols
        OR (v.image_rows - 1) * v.step_y >= f.map_rows OR (v.image_cols - 1) * v.step_x >= f.map_cols`,
  },
];
