"""Let the long calibration runs use the experiments of the short ones."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[2] / "statistical" / "calibration"))
