"""The demonstration does the main job and says how it compares with what was planted."""

import pytest

from pdclass.errors import InputError
from pdclass.jobs.demo import demo, demo_lines


def test_the_demonstration_finds_the_joint_and_the_panel(tmp_path):
    """Of the failing joint's and the panel's pulses some are decided, of all decided discharges nearly all rightly."""
    done = demo(tmp_path / "demo")
    table = done.comparison
    assert table.loc["cable", "cable"] >= 10
    assert table.loc["switchgear", "switchgear"] >= 5
    decided = table.loc[["cable", "local", "switchgear"], ["cable", "local", "switchgear", "interference"]]
    right = sum(decided.loc[label, label] for label in decided.index)
    assert right >= 0.95 * decided.to_numpy().sum()
    page = done.report.read_text(encoding="utf-8")
    for circuit in ("Quay Road", "Dry Dock", "Ferry Terminal", "Cold Store"):
        assert circuit in page
    assert demo_lines(done)[-1].startswith("next: open ")
    with pytest.raises(InputError, match="--force"):
        demo(tmp_path / "demo")
