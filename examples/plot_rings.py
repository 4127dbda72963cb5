#!/usr/bin/env python3
"""Draws rings, and crossings where given, against the tilt of the mount.

    twincone run examples/align.toml -o align.csv
    twincone run examples/tune.toml -o tune.csv
    python3 examples/plot_rings.py align.csv tune.csv -o rings.png

Needs pandas and matplotlib, no display. Shades of grey are enough to tell the curves apart.
"""

import argparse
from itertools import cycle
from pathlib import Path

import matplotlib

matplotlib.use("Agg")
import matplotlib.pyplot as plt
import pandas as pd

# blue and vermilion are told apart by every eye; dashes and marks by a black-and-white printer
LOOKS = [
    {"color": "#0072B2", "linestyle": "-", "marker": "o"},
    {"color": "#D55E00", "linestyle": "--", "marker": "^"},
    {"color": "#009E73", "linestyle": ":", "marker": "s"},
    {"color": "#000000", "linestyle": "-.", "marker": "v"},
]
TILT = "crystal_tilt_deg"


def read(path, column):
    table = pd.read_csv(path)
    for name in (TILT, column):
        if name not in table:
            raise SystemExit(f"{path}: no column {name}; a sweep over crystal.tilt with another report?")
    return table.sort_values(TILT)


def marks(points):
    """Marks at about eight points of a curve."""
    return {"markevery": max(1, points // 8), "markersize": 5, "linewidth": 1.6}


def draw_rings(rings, centre, size):
    """A ring without light has empty cells, which leave a gap in its curve."""
    names = ["process", "photon", "wavelength_nm", "polarization"]
    for look, ((_, photon, wavelength, polarization), ring) in zip(cycle(LOOKS), rings.groupby(names, sort=False)):
        label = f"{polarization}, {photon} {wavelength:g} nm"
        style = look | marks(len(ring))
        axis, angle = ring["axis_h_deg"], ring["half_angle_deg"]
        edge = look | {"marker": "", "linewidth": 0.8}
        centre.plot(ring[TILT], axis, label=label, **style)
        centre.plot(ring[TILT], axis - angle, **edge)
        centre.plot(ring[TILT], axis + angle, **edge)
        size.plot(ring[TILT], angle, label=label, **style)
        half = ring["thickness_deg"] / 2
        size.fill_between(ring[TILT], angle - half, angle + half, color=look["color"], alpha=0.15, linewidth=0)
    centre.set_ylabel("horizontal angle (deg)")
    centre.set_title("axis of each ring; thin: its edges at the height of the axis", loc="left", fontsize="small")
    low, high = centre.get_ylim()
    centre.set_ylim(low, high + 0.25 * (high - low))
    centre.legend(fontsize="small", loc="upper left", ncols=4)
    size.set_ylabel("half angle (deg)")
    size.set_title("half angle; shaded: width at half maximum", loc="left", fontsize="small")


def draw_crossings(crossings, panel):
    style = marks(len(crossings))
    for look, (side, label) in zip(LOOKS, [("a", "crossing a"), ("b", "its partner b")]):
        panel.plot(crossings[TILT], crossings[f"{side}_v_deg"], label=label, **(look | style))
    apart = crossings[crossings["status"] == "apart"]
    if not apart.empty:
        panel.plot(apart[TILT], apart["gap_deg"], label="gap between the rings", **(LOOKS[3] | marks(len(apart))))
    for tilt in crossings["tilt_to_touch_deg"].dropna().round(6).unique():
        panel.axvline(tilt, color="0.4", linewidth=0.8)
        panel.annotate(
            f"rings touch at {tilt:.2f} deg", (tilt, 0.04), xycoords=("data", "axes fraction"), xytext=(4, 0),
            textcoords="offset points", fontsize="small",
        )
    panel.set_ylabel("vertical angle; gap (deg)")
    panel.set_title("where the rings cross", loc="left", fontsize="small")
    panel.legend(fontsize="small", loc="center right")


def main():
    parser = argparse.ArgumentParser(description="Draws rings and crossings against tilt.")
    parser.add_argument("rings", type=Path, help="of `run` with report rings")
    parser.add_argument("crossings", type=Path, nargs="?", help="of `run` with report crossings")
    parser.add_argument("-o", "--output", type=Path, default=Path("rings.png"), help="png, pdf or svg")
    options = parser.parse_args()

    count = 3 if options.crossings else 2
    figure, panels = plt.subplots(count, 1, sharex=True, figsize=(6.4, 2.4 * count + 0.6), layout="constrained")
    draw_rings(read(options.rings, "half_angle_deg"), panels[0], panels[1])
    if options.crossings:
        draw_crossings(read(options.crossings, "separation_deg"), panels[2])
    for panel in panels:
        panel.grid(color="0.88", linewidth=0.6)
        panel.set_axisbelow(True)
    panels[-1].set_xlabel("tilt of the mount (deg)")
    figure.suptitle("Angles outside the crystal", fontsize="medium")
    figure.savefig(options.output, dpi=150)


if __name__ == "__main__":
    main()
