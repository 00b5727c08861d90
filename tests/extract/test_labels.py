"""Annotations reach the pulse at their place."""

import numpy as np
from closed_form import as_capture

from pdclass.extract.labels import carried_labels
from pdclass.pulses import Annotation


def labelled(*notes):
    return as_capture(np.zeros(100), annotations=tuple(notes))


def note(sample, label="local"):
    return Annotation(sample, 10, label=label, basis="expert", labelled_by="human:ab")


def test_the_nearest_pulse_that_is_no_echo_gets_the_label():
    """The earlier of two equally near pulses is taken; an echo is passed over."""
    columns, notes = carried_labels(labelled(note(1010), note(2000)), np.array([1000, 1020, 2001, 2004]), {2})
    assert columns["label"] == ["local", None, None, "local"]
    assert notes == []


def test_without_pulses_every_label_is_lost():
    """The count and the first place are said, as are labels that nobody knows."""
    foreign = Annotation(5, 10, comment="label: strange")
    columns, notes = carried_labels(labelled(note(70), note(30), foreign), np.zeros(0, np.int64), set())
    assert columns["label"] == []
    assert "2 of 2 labels found no pulse within 0.5 us, the first at sample 30" in notes[0]
    assert "1 annotations carry labels that pdclass does not know" in notes[1]
