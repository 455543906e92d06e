/** One column of an exported table. The unit is in the name; `means` is what the manual and `--help` print. */
export interface Column {
  readonly name: string;
  readonly means: string;
}

export interface ExportedTable {
  /** As typed on the command line. */
  readonly name: string;
  /** The view of the database that holds it. */
  readonly view: string;
  readonly row: string;
  /** Order of the rows, so that the same analysis always exports the same bytes. */
  readonly orderBy: readonly string[];
  readonly columns: readonly Column[];
}

const c = (name: string, means: string): Column => ({ name, means });

const FRAME_KEYS: readonly Column[] = [
  c("cooldown", "the cooldown's name"),
  c("branch", "cooling or warming"),
  c("cycle", "a cooling series and the warming series after it, from 1"),
  c("frame", "index of the frame in the cooldown, from 0"),
  c("temperature_K", "temperature of the frame"),
];
const ANALYSIS = c("analysis", "number of the analysis that the row comes from");

export const TABLES: readonly ExportedTable[] = [
  {
    name: "temperature",
    view: "temperature",
    row: "one frame",
    orderBy: ["cooldown", "analysis", "frame"],
    columns: [
      ...FRAME_KEYS,
      c("drift_x_nm", "position of the frame in the cooldown's coordinates, along +x"),
      c("drift_y_nm", "the same along +y (towards larger row index)"),
      c("drift_sd_nm", "standard deviation of the drift per axis; 0 for the reference frame"),
      c("metallic_fraction", "metallic share of the measured, debris-free pixels of this frame"),
      c("metallic_fraction_low", "lower end of its 95 % interval, about this field of view"),
      c("metallic_fraction_high", "upper end of it"),
      c(
        "amplitude_insulating",
        "amplitude of the insulating state, gain-corrected, in the file's unit as scaled in the first frame",
      ),
      c("amplitude_metallic", "the same of the metallic state"),
      c("metallic_domains", "number of metallic domains (8 neighbours)"),
      c("insulating_domains", "number of insulating domains (4 neighbours)"),
      c("wall_length_nm", "length of all walls in the measured, debris-free area"),
      c("profiles", "fitted profiles without a flag"),
      c(
        "wall_width_median_nm",
        "median intrinsic 10-90 % width, limits treated as limits; empty where over half are limits",
      ),
      c("wall_width_median_low_nm", "lower end of its 95 % interval, tip uncertainty included"),
      c("wall_width_median_high_nm", "upper end of it"),
      c("unresolved_share", "share of profiles whose width is only an upper limit"),
      c("fringe_share", "share of the tested wall length that carries a fringe; empty where none was tested"),
      c("flag", "why a number is missing or doubtful; empty where sound"),
      c("gain", "gain of the frame relative to the first"),
      c("usable_pixels", "pixels measured and free of debris and scars"),
      c("debris_pixels", "pixels left out as debris"),
      c("scar_pixels", "pixels left out as scars"),
      ANALYSIS,
      c(
        "temperature_sd_K",
        "spread of the temperature over the scan, ramp included; empty without a thermometer's log",
      ),
      c("ramp_K_per_s", "slope of the temperature over the scan; empty without a log"),
      c("lag_shift_K", "what the sample's lag behind the sensor added to the temperature; empty without a log"),
      c(
        "amplitude_noise_relative",
        "noise of the amplitude a pixel, one standard deviation, relative to the amplitude",
      ),
      c("phase_noise_rad", "the same of the optical phase; empty where there is none"),
      c("topography_noise_nm", "the same of the topography; empty where there is none"),
      c(
        "noise_by_retrace",
        "channels whose noise is from trace less retrace; the others: from neighbours along the row",
      ),
    ],
  },
  {
    name: "walls",
    view: "walls",
    row: "one fitted profile",
    orderBy: ["cooldown", "analysis", "frame", "wall", "profile"],
    columns: [
      ...FRAME_KEYS,
      c("wall", "number of the wall in its frame, from 0"),
      c("profile", "number of the profile along its wall, from 0"),
      c("x_nm", "position of the wall here, in the cooldown's coordinates"),
      c("y_nm", "the same along +y"),
      c("normal_deg", "direction from insulating to metallic, anticlockwise from +x with +y up the page"),
      c("arc_nm", "distance along the wall"),
      c("width_nm", "intrinsic 10-90 % width; empty where unresolved"),
      c("width_sd_nm", "standard deviation from the profile's own noise"),
      c("width_sd_tip_nm", "what the tip's uncertainty adds, common to all profiles"),
      c("width_upper95_nm", "upper limit of the width at 95 %"),
      c("resolved", "1 where the width differs from 0 at 5 %, else 0"),
      c("apparent_width_nm", "10-90 % width as seen, blur included"),
      c("tip_resolution_nm", "full width at half maximum of the tip's response that was used"),
      c("amplitude_insulating", "amplitude of the insulating plateau, gain-corrected"),
      c("amplitude_metallic", "amplitude of the metallic plateau, gain-corrected"),
      c("reduced_chi2", "chi-square over degrees of freedom with the measured noise"),
      c("flag", "why the profile is left out of statistics; empty where sound"),
      c("stretch_nm", "length of wall that the profile's pixels stand for"),
      c("pixels", "pixels fitted"),
      ANALYSIS,
    ],
  },
  {
    name: "fringes",
    view: "fringes",
    row: "one wall, or stretch of wall, tested",
    orderBy: ["cooldown", "analysis", "frame", "wall", "stretch"],
    columns: [
      ...FRAME_KEYS,
      c("wall", "number of the wall in its frame"),
      c("detected", "1 where a fringe is found after control of the false discovery rate over the cooldown"),
      c("p_value", "chance of as large a departure from the two-state step by noise alone"),
      c("side", "metallic or insulating: the side of the largest departure"),
      c("contrast_rad", "largest departure of the optical phase from the two-state step, as the tip sees it, signed"),
      c("contrast_sd_rad", "its standard deviation"),
      c("offset_nm", "signed distance of that extremum from the wall, positive on the metallic side"),
      c("period_nm", "period of the oscillation before the tip's blur; empty where the data do not hold it"),
      c("period_sd_nm", "its standard deviation"),
      c("decay_nm", "1/e decay length before the tip's blur; empty where the data do not hold it"),
      c("decay_sd_nm", "its standard deviation"),
      c("stretch", "number of the stretch along the wall, from 0"),
      c("arc_from_nm", "where the stretch begins on the wall"),
      c("arc_to_nm", "where it ends"),
      c("adjusted_p", "p-value adjusted for the number of tests in the cooldown"),
      ANALYSIS,
    ],
  },
  {
    name: "domains",
    view: "domains",
    row: "one tracked domain",
    orderBy: ["cooldown", "analysis", "domain"],
    columns: [
      c("cooldown", "the cooldown's name"),
      c("domain", "number of the domain in the cooldown"),
      c("kind", "metallic or insulating"),
      c("first_frame", "frame where it is first seen"),
      c("last_frame", "frame where it is last seen"),
      c("first_temperature_K", "temperature of the first frame"),
      c("last_temperature_K", "temperature of the last frame"),
      c("origin", "first-frame, nucleated, split, or border"),
      c("fate", "last-frame, vanished, merged, or border"),
      c("largest_area_nm2", "largest area seen"),
      ANALYSIS,
    ],
  },
  {
    name: "domain-frames",
    view: "domain_frames",
    row: "one tracked domain in one frame",
    orderBy: ["cooldown", "analysis", "domain", "frame"],
    columns: [
      c("cooldown", "the cooldown's name"),
      c("domain", "number of the domain in the cooldown"),
      c("frame", "index of the frame in the cooldown, from 0"),
      c("temperature_K", "temperature of the frame"),
      c("area_nm2", "area; a lower bound where it touches the border"),
      c("perimeter_nm", "perimeter; empty where it touches the border"),
      c("x_nm", "centroid in the cooldown's coordinates"),
      c("y_nm", "the same along +y"),
      c("touches_border", "1 where the domain reaches the edge of the measured area"),
      ANALYSIS,
    ],
  },
  {
    name: "loops",
    view: "loops",
    row: "one cycle",
    orderBy: ["cooldown", "analysis", "cycle"],
    columns: [
      c("cooldown", "the cooldown's name"),
      c("cycle", "number of the cycle, from 1"),
      c("cooling_half_K", "where the metallic fraction crosses 0.5 on cooling; empty where it never does"),
      c("cooling_half_low_K", "lower end of its 95 % interval, temperature spacing included"),
      c("cooling_half_high_K", "upper end of it"),
      c("warming_half_K", "the same on warming"),
      c("warming_half_low_K", "lower end of its 95 % interval"),
      c("warming_half_high_K", "upper end of it"),
      c("width_K", "warming half minus cooling half"),
      c("width_low_K", "lower end of its 95 % interval"),
      c("width_high_K", "upper end of it"),
      c("area_K", "integral of fraction on cooling minus fraction on warming over the temperatures both reach"),
      c("lowest_fraction", "lowest metallic fraction of the cycle"),
      c("highest_fraction", "highest metallic fraction of the cycle"),
      c("complete", "1 where both branches run from at most 0.02 to at least 0.98"),
      ANALYSIS,
    ],
  },
];

export const tableNamed = (name: string): ExportedTable | undefined => TABLES.find((t) => t.name === name);
