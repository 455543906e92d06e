"""cooldown.yaml and its stacks of TIFF pages: what is measured where, and one frame's images."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import tifffile
import yaml

CHANNELS = ("topography", "amplitude", "phase")


@dataclass(frozen=True)
class Frame:
    frame: int
    branch: str
    cycle: int
    temperature: float
    pages: dict  # channel -> (file, page)


@dataclass(frozen=True)
class Cooldown:
    name: str
    pixel: tuple  # nm along y (rows) and x (columns)
    tip: float  # full width at half maximum, nm
    frames: list

    @property
    def sigma(self):
        return self.tip / (2 * np.sqrt(2 * np.log(2)))


def read_cooldown(file):
    """Stacks only, all three channels, topography in nm and phase in rad: what the generated cooldowns hold."""
    file = Path(file)
    text = yaml.safe_load(file.read_text())
    x, y = text["scan"]["pixel_size_nm"]
    frames, cycle, cooled = [], 0, False
    for series in text["series"]:
        if series["branch"] == "cooling" or not cooled:
            cycle += 1
        cooled = series["branch"] == "cooling"
        for page, temperature in enumerate(series["temperatures_K"]):
            pages = {c: (file.parent / series["stacks"][c], page) for c in CHANNELS}
            frames.append(Frame(len(frames), series["branch"], cycle, float(temperature), pages))
    return Cooldown(text["cooldown"], (float(y), float(x)), float(text["tip"]["resolution_nm"]), frames)


def read_images(frame):
    return [tifffile.imread(*[frame.pages[c][0]], key=frame.pages[c][1]) for c in CHANNELS]
