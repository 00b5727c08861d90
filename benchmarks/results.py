"""Run every benchmark in turn and write what they print to RESULTS.md, with the machine, the versions and the date.

Each benchmark is a script of its own that prints Markdown; its heading here is the first line of its docstring. One that
fails is named as failed in the file, and the run ends with an error.
"""

import ast
import datetime
import os
import platform
import subprocess
import sys
import time
from importlib.metadata import version
from pathlib import Path

HERE = Path(__file__).parent
BENCHES = ("bench_extract", "card_extract", "bench_memory", "bench_features", "bench_reasons", "bench_world")
LIBRARIES = ("numpy", "scipy", "numba", "PyWavelets", "scikit-learn", "pandas", "shap", "tsfel", "tsfresh")
MINUTES_EACH = 20


def machine():
    """The kind of processor, never its host."""
    from llvmlite.binding import get_host_cpu_features

    features = get_host_cpu_features()
    widest = next(
        (words for name, words in (("avx512f", "AVX-512"), ("avx2", "AVX2"), ("neon", "NEON")) if features.get(name)),
        "",
    )
    return f"{platform.machine()}{' with ' + widest if widest else ''}, {os.cpu_count()} cores, {platform.system()}"


def head():
    """What the figures were measured on."""
    versions = ", ".join([f"Python {platform.python_version()}", *(f"{name} {version(name)}" for name in LIBRARIES)])
    return f"""# Results of the benchmarks

Made by `make bench`; every table below was printed by the script named over it, which also runs alone.
Speeds are ratios within one run, from processor time on one core with the ways taken in turn; absolute rates depend on
the machine and on what else it does. Everything is measured on synthetic signals.

| measured on | |
| --- | --- |
| machine | {machine()} |
| versions | {versions} |
| date | {datetime.datetime.now(datetime.UTC).date()} |
"""


def section(name):
    """Heading and output of one benchmark, and whether it went well."""
    script = HERE / f"{name}.py"
    words = ast.get_docstring(ast.parse(script.read_text(encoding="utf-8")))
    title, _, rest = words.partition("\n")
    title = title.rstrip(".")
    begun = time.monotonic()
    done = subprocess.run([sys.executable, str(script)], capture_output=True, text=True, timeout=60 * MINUTES_EACH)
    spent = f"{(time.monotonic() - begun) / 60:.1f}"
    print(f"{name}: {spent} minutes{'' if done.returncode == 0 else ', failed'}", flush=True)
    if done.returncode:
        print(done.stderr, file=sys.stderr)
        last = done.stderr.strip().splitlines()[-1:] or ["no message"]
        return f"## {title}\n\n`{script.name}` **failed**: {last[0]}\n", False
    return f"## {title}\n\n`{script.name}`\n\n{rest.strip()}\n\n{done.stdout.strip()}\n", True


def missed(sections):
    """The aims that were not reached, from the tables of all benchmarks."""
    lines = [line for words in sections for line in words.splitlines() if line.endswith("| **no** |")]
    if not lines:
        return "Every aim below was reached.\n"
    rows = [" | ".join(cell.strip() for cell in line.strip("|").split("|")[:3]) for line in lines]
    return "Not reached:\n\n| aim | | reached |\n| --- | --- | --- |\n" + "".join(f"| {row} |\n" for row in rows)


def main():
    sections = [section(name) for name in BENCHES]
    texts = [words for words, _ in sections]
    text = "\n".join([head(), missed(texts), *texts])
    while "\n\n\n" in text:
        text = text.replace("\n\n\n", "\n\n")
    (HERE / "RESULTS.md").write_text(text, encoding="utf-8")
    if not all(well for _, well in sections):
        raise SystemExit("a benchmark failed; RESULTS.md says which")


if __name__ == "__main__":
    main()
