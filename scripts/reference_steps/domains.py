"""Domains: labels, their sizes, and who is who from one frame to the next."""

import numpy as np
from skimage.measure import label, perimeter_crofton, regionprops


def label_frame(metallic, valid, pixel, tip):
    """Labels (metallic first, then insulating) and a row a domain."""
    least = np.pi * (tip / 2) ** 2 / (pixel[0] * pixel[1])
    labels = np.zeros(metallic.shape, np.uint16)
    rows = []
    for kind, state, connectivity in (("metallic", metallic, 2), ("insulating", ~metallic, 1)):
        for r in regionprops(label(state & valid, connectivity=connectivity)):
            if r.area < least:
                continue
            number = len(rows) + 1
            labels[r.slice][r.image] = number
            border = (r.bbox[0] == 0 or r.bbox[1] == 0 or r.bbox[2] == metallic.shape[0]
                      or r.bbox[3] == metallic.shape[1])
            rows.append({
                "label": number, "kind": kind, "area": r.area * pixel[0] * pixel[1], "border": bool(border),
                "y": r.centroid[0] * pixel[0], "x": r.centroid[1] * pixel[1],
                "perimeter": None if border else perimeter_crofton(np.pad(r.image, 1), directions=4) * np.sqrt(pixel[0] * pixel[1]),
            })
    return labels, rows


def overlaps(before, after, shift):
    """Pixels that each pair of labels shares when `after` lies `shift` (rows, columns) further than `before` on the sample."""
    dy, dx = (int(round(s)) for s in shift)
    rows, cols = before.shape
    a = before[max(0, dy):rows + min(0, dy), max(0, dx):cols + min(0, dx)]
    b = after[max(0, -dy):rows + min(0, -dy), max(0, -dx):cols + min(0, -dx)]
    width = int(after.max()) + 1
    return np.bincount((a.astype(np.int64) * width + b).ravel(), minlength=(int(before.max()) + 1) * width).reshape(-1, width)


def matches(before, after, shared, pixel_area):
    """Pairs of labels of one kind that share at least half of the smaller one, largest overlap first."""
    pairs = [
        (shared[a["label"], b["label"]], a["label"], b["label"])
        for a in before for b in after
        if a["kind"] == b["kind"] and shared[a["label"], b["label"]] * pixel_area >= 0.5 * min(a["area"], b["area"])
    ]
    return sorted(pairs, reverse=True)


def track(frames, drifts, pixel):
    """Numbers the domains through the frames: a domain goes on in the one that shares most pixels with it. A part that is left over
    has split off, a whole that is left over has merged. Returns the tracks with their appearances, origins and fates."""
    tracks, current, previous = [], {}, None
    for k, (labels, rows) in enumerate(frames):
        pairs = []
        if previous is not None and drifts[k] is not None and drifts[k - 1] is not None:
            shift = [(b - a) / p for a, b, p in zip(drifts[k - 1], drifts[k], pixel)]
            pairs = matches(previous[1], rows, overlaps(previous[0], labels, shift), pixel[0] * pixel[1])
        now, goes_on = {}, set()
        for _, a, b in pairs:
            if b not in now and a not in goes_on:
                now[b] = current[a]
                goes_on.add(a)
        parents, children = {b for _, _, b in pairs}, {a for _, a, _ in pairs}
        for a in previous[1] if previous is not None else []:
            if a["label"] not in goes_on:
                fate = "merged" if a["label"] in children else "border" if a["border"] else "vanished"
                tracks[current[a["label"]]]["fate"] = fate
        for r in rows:
            if r["label"] not in now:
                origin = "split" if r["label"] in parents else "border" if r["border"] else "nucleated"
                now[r["label"]] = len(tracks)
                tracks.append({"kind": r["kind"], "origin": "first-frame" if k == 0 else origin, "fate": "last-frame",
                               "seen": []})
            tracks[now[r["label"]]]["seen"].append((k, r))
        current, previous = now, (labels, rows)
    return tracks
