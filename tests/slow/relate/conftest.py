"""Let the slow tests of relations import the experiments of the statistical ones by name."""

import sys
from pathlib import Path

for folder in ("relate", "calibration"):
    sys.path.insert(0, str(Path(__file__).parents[2] / "statistical" / folder))
