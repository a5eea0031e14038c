"""Let the calibration tests, here and in tests/slow, import their experiments by name."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))
