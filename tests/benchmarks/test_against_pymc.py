"""Whole processes side by side: ours and a hand-written PyMC model, from start to table.

Not part of the test suite (some minutes): ``pytest tests/benchmarks/test_against_pymc.py -s``.
"""

import re
import subprocess
import sys
import time
from pathlib import Path

import pytest

HERE = Path(__file__).parent
TABLE = HERE.parent / "references" / "carcinoma_raters_1977.csv"
COUNTS = [str(k) for k in range(1, 7)]
TARGET = 20.0


def seconds_of(script):
    """Return the seconds that a script takes, and what it prints."""
    begin = time.perf_counter()
    done = subprocess.run(
        [sys.executable, "-W", "ignore", str(HERE / script), str(TABLE), *COUNTS],
        capture_output=True,
        text=True,
        check=False,
    )
    seconds = time.perf_counter() - begin
    assert done.returncode == 0, done.stderr[-2000:]
    return seconds, done.stdout


@pytest.mark.pymc
def test_whole_process_is_much_faster_than_hand_written_pymc():
    """Both compiled once before (numba's and PyTensor's caches are warm), as on any second run."""
    seconds_of("ours_on_table.py")
    ours, our_table = seconds_of("ours_on_table.py")
    theirs, their_table = seconds_of("hand_written_pymc.py")
    print(f"\nbayeslca {ours:.1f} s\n{our_table}\nPyMC by hand {theirs:.1f} s\n{their_table}")
    assert len(re.findall(r"^\s*\d", their_table, flags=re.MULTILINE)) == len(COUNTS)
    assert theirs / ours >= TARGET
