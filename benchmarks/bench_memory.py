"""Memory of the extraction of a large capture, opened from its file, in a process of its own.

The samples are five cycles of noise with carriers and one pulse, repeated through the file: with a thousand pulses a
cycle the pulses found, which are the result, would alone be more than the limit. A file with holes would have no noise
to measure, so the disk has to hold it all. Run with `make bench`,
or alone: `python benchmarks/bench_memory.py 2` for 2 GB.
"""

import measuring  # first: one thread

import json
import shutil
import subprocess
import sys
import tempfile
import threading
from pathlib import Path

import numpy as np
from cycles import SAMPLES, captured, cycle

from pdclass.capture import open_capture
from pdclass.capture.sigmf_writer import metadata
from pdclass.extract import extract

CYCLES_A_PIECE = 5


def write_capture(stem, gigabytes):
    """A capture of so many gigabytes as metadata and samples; returns the path of the first."""
    piece = cycle(0.0, 3, CYCLES_A_PIECE)[0]
    piece[1_000_000:1_000_040] += np.int16(600)
    repeats = max(1, round(gigabytes * 1e9 / piece.nbytes))
    with open(f"{stem}.sigmf-data", "wb") as file:
        for _ in range(repeats):
            file.write(piece.tobytes())
    content = metadata(captured(np.zeros(8, np.int16)))
    content["global"]["pdclass:sample_count"] = repeats * CYCLES_A_PIECE * SAMPLES
    meta = Path(f"{stem}.sigmf-meta")
    meta.write_text(json.dumps(content))
    return meta


def kilobytes(field):
    """A field of this process's own state; the system's usage counter would begin with the parent's."""
    lines = dict(line.split(":", 1) for line in Path("/proc/self/status").read_text().splitlines())
    return int(lines[field].split()[0])


class Watch(threading.Thread):
    """Looks every few milliseconds at the memory of this process that is no page of a file."""

    def __init__(self):
        super().__init__(daemon=True)
        self.most, self.done = 0, threading.Event()

    def run(self):
        while not self.done.wait(0.01):
            self.most = max(self.most, kilobytes("RssAnon"))


def child(path):
    """Open, extract, and say what was held in memory."""
    before = kilobytes("VmHWM")
    watch = Watch()
    watch.start()
    result = extract(open_capture(path))
    watch.done.set()
    most = kilobytes("VmHWM")
    size = path.with_suffix(".sigmf-data").stat().st_size / 1e9
    print(f"A capture of {size:.3g} GB: {result.duration_s:.0f} s of record, {result.found} pulses found.")
    measuring.table(
        ("memory", "GB"),
        [
            ("at most, mapped pages of the file among it", most / 1e6),
            ("at most, pages of the file left out", watch.most / 1e6),
            ("after the imports", before / 1e6),
        ],
    )
    measuring.aims([(f"memory for a capture of {size:.3g} GB [GB]", "at most", 1, most / 1e6)])


def main(gigabytes):
    if not Path("/proc/self/status").exists():
        raise SystemExit("memory is measured on Linux only")
    if shutil.disk_usage(tempfile.gettempdir()).free < 1.2e9 * gigabytes:
        raise SystemExit(
            f"{tempfile.gettempdir()}: {1.2 * gigabytes:.3g} GB of free disk are needed; give a smaller size, or set TMPDIR"
        )
    with tempfile.TemporaryDirectory() as folder:
        meta = write_capture(Path(folder) / "large", gigabytes)
        done = subprocess.run([sys.executable, __file__, "--child", str(meta)], capture_output=True, text=True)
    if done.returncode:
        raise SystemExit(done.stderr)
    print(done.stdout, end="")
    measuring.weak(
        "One pulse in five cycles: the pulses found are held until the end, about 8 kB each.",
        "Pages of the mapped file that the passes leave behind are given back; where the system knows no such advice they count as this process's until others need them.",
    )


if __name__ == "__main__":
    if "--child" in sys.argv:
        child(Path(sys.argv[-1]))
    else:
        main(float(sys.argv[1]) if len(sys.argv) > 1 else 10.0)
