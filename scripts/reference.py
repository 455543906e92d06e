"""The same job with NumPy, SciPy and scikit-image: python3 reference.py COOLDOWN.yaml OUT_FOLDER [PROCESSES].

What a careful scientist would have instead of coldseam, and what `npm run bench` sets it beside. Writes the tables as CSV with the
same columns (no intervals for fractions, loops and medians: those fields are empty) and prints the seconds of each stage as JSON.
"""

import json
import os
import resource
import sys
import tempfile
import time
from multiprocessing import Pool
from pathlib import Path

import numpy as np

from reference_steps.clean import clean, first_levels
from reference_steps.cooldown import read_cooldown
from reference_steps.domains import label_frame, track
from reference_steps.drift import register
from reference_steps.fringes import control, test_walls
from reference_steps.kink import RISE, Kink
from reference_steps.loops import loops
from reference_steps.states import common_levels, find_states
from reference_steps.tables import write_tables
from reference_steps.walls import fit_walls

LEAST_CORRELATION = 0.5
shared = {}  # what every process needs: set before the pool is made, inherited by it


def kept(frame, name):
    return shared["folder"] / f"{frame.frame}-{name}.npy"


def clean_one(frame):
    cooldown = shared["cooldown"]
    found = clean(frame, cooldown.pixel, cooldown.tip)
    for name, value in found.items():
        np.save(kept(frame, name), value)
    return first_levels(found["z"], found["valid"], cooldown.pixel, cooldown.tip)


def place_one(pair):
    reference, moving = (np.load(kept(f, "topography")) for f in pair)
    return register(reference, moving)


def place(pool, frames):
    """Every frame against the first one; one that shares too little with it, against a neighbour that has a place."""
    found = pool.map(place_one, [(frames[0], f) for f in frames[1:]], chunksize=1)
    places = [np.zeros(2)] + [s if c > LEAST_CORRELATION else None for s, c in found]
    for k in range(1, len(frames)):
        if places[k] is None and places[k - 1] is not None:
            shift, correlation = place_one((frames[k - 1], frames[k]))
            if correlation > LEAST_CORRELATION:
                places[k] = places[k - 1] + shift
    return places


def measure_one(task):
    frame, first, common = task
    cooldown, kink = shared["cooldown"], shared["kink"]
    pixel, tip = cooldown.pixel, cooldown.tip
    z, valid = (np.load(kept(frame, n)) for n in ("z", "valid"))
    states = find_states(z.astype(np.complex128), valid, first, common, pixel, tip)
    metallic = states["metallic"]
    result = {"fraction": float(metallic[valid].mean()), "low": abs(states["low"]), "high": abs(states["high"]),
              "walls": [], "profiles": [], "fringes": []}
    if metallic[valid].any() and not metallic[valid].all():
        result["walls"], result["profiles"] = fit_walls(states, valid, pixel, tip, kink)
        widths = [p["width"] for p in result["profiles"] if p["flag"] == ""]
        if widths:
            result["fringes"] = test_walls(states, valid, pixel, result["walls"], np.median(widths) / RISE, kink, tip)
    result["labels"], result["domains"] = label_frame(metallic, valid, pixel, tip)
    return result


def main(yaml_file, out, processes):
    begin = last = time.perf_counter()
    stages = {}

    def stage(name):
        nonlocal last
        now = time.perf_counter()
        stages[name] = now - last
        last = now

    cooldown = read_cooldown(yaml_file)
    frames = cooldown.frames
    with tempfile.TemporaryDirectory(prefix="reference-") as folder:
        shared.update(cooldown=cooldown, folder=Path(folder), kink=Kink(cooldown.sigma))
        stage("reading")
        with Pool(processes) as pool:
            first = pool.map(clean_one, frames, chunksize=1)
            stage("cleaning")
            places = place(pool, frames)
            stage("placing")
            common = common_levels(first)
            results = pool.map(measure_one, [(f, l, common) for f, l in zip(frames, first)], chunksize=1)
            stage("measuring")
            pool.close()
            pool.join()
        drifts = [None if p is None else tuple(p * cooldown.pixel) for p in places]
        tests = [t for r in results for t in r["fringes"]]
        if tests:
            control(tests)
        tracks = track([(r["labels"], r["domains"]) for r in results], drifts, cooldown.pixel)
        cycles = loops(frames, [r["fraction"] for r in results])
        stage("histories")
    write_tables(Path(out), cooldown, results, drifts, tracks, cycles)
    stage("storing")
    use = [resource.getrusage(w) for w in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)]
    print(json.dumps({
        "stages": stages, "whole": time.perf_counter() - begin, "cpu": sum(u.ru_utime + u.ru_stime for u in use),
        "peak_mib": max(u.ru_maxrss for u in use) / 1024, "processes": processes,
        "profiles": sum(len(r["profiles"]) for r in results),
    }))


if __name__ == "__main__":
    main(sys.argv[1], sys.argv[2], int(sys.argv[3]) if len(sys.argv) > 3 else os.cpu_count())
