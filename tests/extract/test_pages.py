"""What a large mapped record leaves in memory."""

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from pdclass.extract.pages import let_go

CHILD = """
import sys
from pathlib import Path
import numpy as np
from pdclass.extract import extract
from pdclass.pulses import Capture, Chain

def most():
    lines = dict(line.split(":", 1) for line in Path("/proc/self/status").read_text().splitlines())
    return int(lines["VmHWM"].split()[0])

def search(samples):
    counts = np.memmap(sys.argv[1], np.int16, "r", shape=(samples,))
    chain = Chain(100e6, 1e-4, 14, mains_hz=50.0)
    return extract(Capture(chain, counts, "c", "s", "1", "0" * 64, "record")).found

search(10_000_000)
before = most()
print(search(150_000_000), most() - before)
"""


@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="memory is told by Linux only")
def test_a_mapped_record_does_not_stay_in_memory(tmp_path):
    """A file of 300 MB, three hundred pulses in it, adds less than 100 MB to what a process needs for 20 MB."""
    piece = np.rint(np.random.default_rng(1).normal(0, 10, 500_000)).astype(np.int16)
    piece[250_000:250_040] += np.int16(300)
    with (tmp_path / "large.bin").open("wb") as file:
        file.writelines(piece.tobytes() for _ in range(300))
    child = [sys.executable, "-c", CHILD, str(tmp_path / "large.bin")]
    found, added_kb = subprocess.run(child, capture_output=True, text=True, check=True).stdout.split()
    assert int(found) >= 300
    assert int(added_kb) < 100_000


def test_what_was_let_go_is_read_again(tmp_path):
    """The samples of a map are the same afterwards; one that may be written to, and a plain array, are left alone."""
    wanted = np.arange(200_000, dtype=np.int16)
    wanted.tofile(tmp_path / "counts.bin")
    for mode in ("r", "c", "r+"):
        counts = np.memmap(tmp_path / "counts.bin", np.int16, mode, offset=6)
        if mode == "c":
            counts[100_000] = -7
        let_go(counts[10:], 0, counts.size - 10)
        assert counts[100_000] == (-7 if mode == "c" else wanted[100_003])
    let_go(wanted, 0, wanted.size)
