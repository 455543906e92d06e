"""The loop: where each branch crosses one half, its width, its area."""

import numpy as np


def half(temperature, fraction):
    """Temperature at which a rising branch crosses one half, by straight lines between its points; None where it does not."""
    above = fraction >= 0.5
    if above.all() or not above.any():
        return None
    k = int(np.argmax(above))
    if k == 0:
        return None
    t, f = temperature[k - 1 : k + 1], fraction[k - 1 : k + 1]
    return float(t[0] + (0.5 - f[0]) / (f[1] - f[0]) * (t[1] - t[0]))


def loops(frames, fractions):
    out = []
    for cycle in sorted({f.cycle for f in frames}):
        branch = {}
        for name in ("cooling", "warming"):
            pairs = sorted((f.temperature, v) for f, v in zip(frames, fractions) if f.cycle == cycle and f.branch == name)
            branch[name] = np.array(pairs).reshape(-1, 2).T
        halves = {n: half(*b) if b.size else None for n, b in branch.items()}
        row = {"cycle": cycle, "cooling": halves["cooling"], "warming": halves["warming"], "width": None, "area": None}
        if None not in halves.values():
            row["width"] = halves["warming"] - halves["cooling"]
        if all(b.size for b in branch.values()):
            grid = np.unique(np.concatenate([b[0] for b in branch.values()]))
            grid = grid[(grid >= max(b[0][0] for b in branch.values())) & (grid <= min(b[0][-1] for b in branch.values()))]
            gap = np.interp(grid, *branch["cooling"]) - np.interp(grid, *branch["warming"])
            row["area"] = float(np.trapz(gap, grid))
        all_f = np.concatenate([b[1] for b in branch.values() if b.size])
        row |= {"lowest": float(all_f.min()), "highest": float(all_f.max())}
        row["complete"] = int(all(b.size and b[1].min() <= 0.02 and b[1].max() >= 0.98 for b in branch.values()))
        out.append(row)
    return out
