"""Let the tests of relations import their experiments, and those of calibration, by name."""

import sys
from pathlib import Path

for folder in ("relate", "calibration"):
    sys.path.insert(0, str(Path(__file__).parents[1] / folder))
