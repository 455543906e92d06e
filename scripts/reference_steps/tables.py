"""The results as CSV with the names of the exported tables' columns; a missing value is an empty field."""

import csv

import numpy as np


def text(v):
    if v is None or (isinstance(v, float) and not np.isfinite(v)):
        return ""
    return repr(float(v)) if isinstance(v, (float, np.floating)) else str(v)


def write(folder, name, rows):
    columns = list(rows[0]) if rows else ["cooldown"]
    with open(folder / f"{name}.csv", "w", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(columns)
        writer.writerows([text(r[c]) for c in columns] for r in rows)


def write_tables(folder, cooldown, results, drifts, tracks, loops):
    folder.mkdir(parents=True, exist_ok=True)
    temperature, walls, fringes, appearances, domains = [], [], [], [], []
    for f, r, drift in zip(cooldown.frames, results, drifts):
        y, x = drift if drift is not None else (None, None)
        keys = {"cooldown": cooldown.name, "branch": f.branch, "cycle": f.cycle, "frame": f.frame,
                "temperature_K": f.temperature}
        sound = [p for p in r["profiles"] if p["flag"] == ""]
        temperature.append(keys | {
            "drift_x_nm": x, "drift_y_nm": y, "drift_sd_nm": None, "metallic_fraction": r["fraction"],
            "metallic_fraction_low": None, "metallic_fraction_high": None,
            "amplitude_insulating": r["low"], "amplitude_metallic": r["high"],
            "metallic_domains": sum(d["kind"] == "metallic" for d in r["domains"]),
            "insulating_domains": sum(d["kind"] == "insulating" for d in r["domains"]),
            "wall_length_nm": float(sum(w["length"] for w in r["walls"])), "profiles": len(sound),
            "wall_width_median_nm": float(np.median([p["width"] for p in sound])) if sound else None,
            "wall_width_median_low_nm": None, "wall_width_median_high_nm": None, "unresolved_share": None,
            "fringe_share": None, "flag": "" if drift is not None else "not-placed",
        })
        for p in r["profiles"]:
            sd = p.get("sd")
            resolved = int("width" in p and p["width"] > 2 * sd)
            walls.append(keys | {
                "wall": p["wall"], "profile": p["profile"],
                "x_nm": None if x is None else p["x"] + x, "y_nm": None if y is None else p["y"] + y,
                "normal_deg": p["normal_deg"], "arc_nm": p["arc"], "width_nm": p["width"] if resolved else None,
                "width_sd_nm": sd if resolved else None, "width_sd_tip_nm": None,
                "width_upper95_nm": p["width"] + 1.645 * sd if "width" in p else None, "resolved": resolved,
                "apparent_width_nm": p.get("apparent"), "tip_resolution_nm": cooldown.tip,
                "amplitude_insulating": None, "amplitude_metallic": None, "reduced_chi2": p.get("chi2"),
                "flag": p["flag"],
            })
        for t in r["fringes"]:
            fringes.append(keys | {
                "wall": t["wall"], "detected": t["detected"], "p_value": t["p"], "side": t["side"],
                "contrast_rad": t["contrast"], "contrast_sd_rad": t["contrast_sd"], "offset_nm": t["offset"],
                "period_nm": t.get("period"), "period_sd_nm": t.get("period_sd"), "decay_nm": t.get("decay"),
                "decay_sd_nm": t.get("decay_sd"),
            })
    for number, track in enumerate(tracks):
        first, last = track["seen"][0][0], track["seen"][-1][0]
        domains.append({
            "cooldown": cooldown.name, "domain": number, "kind": track["kind"], "first_frame": first, "last_frame": last,
            "first_temperature_K": cooldown.frames[first].temperature,
            "last_temperature_K": cooldown.frames[last].temperature, "origin": track["origin"], "fate": track["fate"],
            "largest_area_nm2": float(max(d["area"] for _, d in track["seen"])),
        })
        for k, d in track["seen"]:
            y, x = drifts[k] if drifts[k] is not None else (None, None)
            appearances.append({
                "cooldown": cooldown.name, "domain": number, "frame": k, "temperature_K": cooldown.frames[k].temperature,
                "area_nm2": float(d["area"]), "perimeter_nm": d["perimeter"], "x_nm": None if x is None else d["x"] + x,
                "y_nm": None if y is None else d["y"] + y, "touches_border": int(d["border"]),
            })
    rows = [{
        "cooldown": cooldown.name, "cycle": c["cycle"], "cooling_half_K": c["cooling"], "cooling_half_low_K": None,
        "cooling_half_high_K": None, "warming_half_K": c["warming"], "warming_half_low_K": None,
        "warming_half_high_K": None, "width_K": c["width"], "width_low_K": None, "width_high_K": None,
        "area_K": c["area"], "lowest_fraction": c["lowest"], "highest_fraction": c["highest"],
        "complete": c["complete"],
    } for c in loops]
    for name, table in (("temperature", temperature), ("walls", walls), ("fringes", fringes), ("domains", domains),
                        ("domain-frames", appearances), ("loops", rows)):
        write(folder, name, table)
