"""Make the pictures of README.md from the demo's results: ``python docs/images/make_images.py``.

Run `make study` before. Needs Chromium.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path

import matplotlib.image as image

import bayeslca as lca
from bayeslca.report.plots import plot_profile

HERE = Path(__file__).parent
RESULTS = HERE.parents[1] / "results" / "water_points"
WIDTH, HEIGHT = 960, 935  # as far as the answer


def main(results: Path) -> None:
    """Write both pictures."""
    with tempfile.TemporaryDirectory() as folder:
        whole = Path(folder) / "page.png"
        subprocess.run(
            [
                "chromium", "--headless", "--no-sandbox", "--disable-gpu", "--hide-scrollbars",
                "--force-device-scale-factor=1.5", f"--window-size={WIDTH},{HEIGHT}",
                f"--screenshot={whole}", (results / "report.html").resolve().as_uri(),
            ],
            check=True, capture_output=True, timeout=120,
        )  # fmt: skip
        image.imsave(HERE / "report.png", image.imread(whole)[: int(1.5 * HEIGHT)])
    axes = plot_profile(lca.Posterior.load(results / "fit.nc"))
    axes.figure.savefig(HERE / "profile.png", dpi=110, bbox_inches="tight")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else RESULTS)
