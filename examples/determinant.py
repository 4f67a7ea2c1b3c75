"""Draw det r on its circle for the sliding superlattice: the picture in the README.

Run it with ``python examples/determinant.py``; it writes determinant.png beside itself.
"""

from pathlib import Path

import matplotlib
import numpy as np

import scatterpump as sp

matplotlib.use("Agg")
import matplotlib.pyplot as plt  # after the choice of the backend

HERE = Path(__file__).parent
INK, LEVEL = "0.15", "#c0392b"


def main() -> None:
    pump = sp.load_device(HERE / "superlattice.toml").pump()
    winding = sp.certify(pump)
    phases = np.linspace(0.0, 2 * np.pi, 241)
    determinant = sp.reflect(pump, phases).determinant
    turned = np.unwrap(np.angle(determinant)) - np.angle(determinant[0])

    figure, (circle, line) = plt.subplots(1, 2, figsize=(8.4, 3.7), width_ratios=(1, 1.25), layout="constrained")
    angle = np.linspace(0, 2 * np.pi, 361)
    circle.plot(np.cos(angle), np.sin(angle), color="0.8", lw=1)
    radius = 1 + 0.16 * phases / (2 * np.pi)  # lifted off the circle as phi grows, so that a second turn would show
    path = radius * np.exp(1j * turned)
    dots = circle.scatter(path.real, path.imag, c=phases / np.pi, cmap="cividis", s=9, zorder=3)
    circle.set_aspect("equal")
    circle.set_axis_off()
    circle.set_title(r"$\det\, r$, lifted outwards as $\varphi$ grows", fontsize=10)
    figure.colorbar(dots, ax=circle, label=r"$\varphi/\pi$", shrink=0.75)

    line.plot(phases / np.pi, turned / (2 * np.pi), color=INK)
    for start, end in winding.covering:
        line.plot(np.array([start, end]) / np.pi, [-0.12, -0.12], color="0.55", lw=1, marker="|", ms=7)
    for crossing in winding.crossings:
        line.axvline(crossing.phase / np.pi, color=LEVEL, lw=1, ls="--")
        line.annotate(
            "edge level passes",
            (crossing.phase / np.pi, 0.06),
            xytext=(6, 0),
            textcoords="offset points",
            color=LEVEL,
            fontsize=9,
        )
    line.text(0.02, -0.21, f"{winding.evaluations} overlapping intervals of the proof", fontsize=8, color="0.4")
    line.set(xlabel=r"$\varphi/\pi$", ylabel=r"turns of $\det\, r$", xlim=(0, 2), ylim=(-0.26, 1.06))
    line.spines[["top", "right"]].set_visible(False)
    figure.savefig(HERE / "determinant.png", dpi=110)


if __name__ == "__main__":
    main()
