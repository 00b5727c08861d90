"""What a command says: progress on stderr, the result on stdout."""

from __future__ import annotations

import json
import sys
from collections.abc import Iterable
from typing import Any, TypeVar

import typer

from pdclass.errors import InputError

Item = TypeVar("Item")


class Terminal:
    """Progress for a person: a bar on a terminal, a line a stage elsewhere."""

    def say(self, line: str) -> None:
        """One line on stderr."""
        print(line, file=sys.stderr)

    def track(self, items: Iterable[Item], words: str, total: int) -> Iterable[Item]:
        """Items with a bar, or with one line when all have passed."""
        if not sys.stderr.isatty() or total < 2:
            yield from items
            print(f"{words}: {total}", file=sys.stderr)
            return
        from rich.console import Console
        from rich.progress import track

        yield from track(items, description=words, total=total, console=Console(stderr=True))


def result(lines: list[str], content: dict[str, Any], *, as_json: bool) -> None:
    """The result on stdout: lines for a person, or one JSON object for a program."""
    print(json.dumps(content, indent=1, ensure_ascii=False, default=str) if as_json else "\n".join(lines))


def pair(text: str | None, option: str) -> tuple[float, float] | None:
    """Two numbers, LOW,HIGH, from an option."""
    if text is None:
        return None
    try:
        low, high = (float(part) for part in text.split(","))
    except ValueError:
        raise InputError(f"{option}: expected LOW,HIGH in hertz, as 100e3,25e6, found '{text}'") from None
    return low, high


def shares(text: str | None, option: str) -> dict[str, float] | None:
    """A class mix from an option: cable=0.1,local=0.1,..."""
    if text is None:
        return None
    try:
        pairs = [(name.strip(), float(share)) for name, share in (part.split("=") for part in text.split(","))]
    except ValueError:
        raise InputError(f"{option}: expected cable=0.1,local=0.2,..., found '{text}'") from None
    if len(dict(pairs)) < len(pairs):
        raise InputError(f"{option}: expected each label once, found one twice in '{text}'")
    return dict(pairs)


CIRCUIT = typer.Option(None, "--circuit", help="Circuit, where the file does not name it.", metavar="NAME")
SITE = typer.Option(None, "--site", help="Site, where the file does not name it.", metavar="NAME")
SENSOR = typer.Option(None, "--sensor", help="Sensor, where the file does not name it.", metavar="NAME")
SESSION = typer.Option(None, "--session", help="Session, where the file does not name it.", metavar="NAME")
RATE = typer.Option(None, "--rate-hz", help="Sampling rate [Hz], where the file does not state it.")
COUNT = typer.Option(None, "--volts-per-count", help="Size of a count [V], where the file does not state it.")
BAND = typer.Option(None, "--band-hz", help="Corners of the chain [Hz], where not stated.", metavar="LOW,HIGH")
MAINS = typer.Option(None, "--mains-hz", help="Mains frequency [Hz], where the file does not state it.")
MAP = typer.Option(None, "--map", help="What the columns of a CSV trace are (TOML).", metavar="MAP.toml")
LABELS = typer.Option(None, "--labels", help="Label file (CSV); replaces the tables' labels.", metavar="CSV")
CLASSES = typer.Option(
    None, "--classes", help="Own classes in it: NAME, or NAME=LABEL for a kind of LABEL.", metavar="NAME[=LABEL],..."
)
JSON = typer.Option(False, "--json", help="Print the result as JSON.")
JOBS = typer.Option(1, "--jobs", min=1, help="Processes; does not change the result.")
FORCE = typer.Option(False, "--force", help="Replace what an earlier run has written there.")
