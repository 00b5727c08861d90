"""Scenario files are checked before anything is simulated, and the shipped ones are whole."""

import re
import tomllib

import pytest
from pydantic import BaseModel, ValidationError

from pdclass.errors import InputError
from pdclass.settings import shipped
from pdclass.sim.ranges import CircuitEntry, Scenario, SourceEntry, read_scenario

SHIPPED = sorted(shipped("synthetic").glob("*.toml"))
NAMED = """
name = "x"
[[circuit]]
name = "a"
sensor = "s"
length_m = 500.0
[[circuit.sources]]
label = "{label}"
distance_m = {place}
pulses_per_cycle = 1.0
snr_db = [1.0, 2.0]
"""


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: path.stem)
def test_shipped_scenarios_are_read(path):
    """Every shipped scenario is valid and bears the name of its file."""
    assert read_scenario(path).name == path.stem


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        ('name = "x"\ncircuts = 3', "circuts: unknown key; the nearest known one is 'circuits'"),
        ('name = "x"\n[chain]\nrates_hz = [99e6]', "a rate is one of"),
        ('name = "x"\nsnr_db = [40.0, 10.0]', "the lower bound stands first"),
        ('name = "x"\n[cable]\nareas_mm2 = [33]', "areas_mm2"),
        (NAMED.format(label="cable", place=0.0), "distance_m lies between 10 and 500 m"),
        (NAMED.format(label="local", place=11.0), "distance_m lies between 0 and 10 m"),
        ('name = "Not A Name"', "name"),
        ('name = "x"\n[mix]\ncable = 0.0\nlocal = 0.0\nswitchgear = 0.0\ninterference = 0.0', "at least one"),
        ('name = "x"\n[capture]\npulses = [-1, 3]', "pulses"),
    ],
)
def test_what_is_wrong_is_named(tmp_path, text, wanted):
    """A wrong key or value is one line with the file and the field."""
    path = tmp_path / "scenario.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError) as error:
        read_scenario(path)
    assert str(path) in str(error.value)
    assert wanted in str(error.value)
    assert "\n" not in str(error.value)


def _kinds(settings):
    """The classes of settings within settings."""
    yield settings
    for field in settings.model_fields.values():
        if isinstance(field.default, BaseModel):
            yield from _kinds(type(field.default))


@pytest.mark.parametrize(
    "kind", dict.fromkeys([*_kinds(Scenario), CircuitEntry, SourceEntry]), ids=lambda kind: kind.__name__
)
def test_every_distribution_is_explained(kind):
    """The docstring of a set of settings names every field that a scenario may set."""
    assert set(kind.model_fields) <= set(re.findall(r"\w+", kind.__doc__))


def _numbers(settings, where=()):
    """Path and value of every number, pair, list or weighing of numbers in a set of settings."""
    for name in type(settings).model_fields:
        value = getattr(settings, name)
        if isinstance(value, BaseModel):
            yield from _numbers(value, (*where, name))
        elif isinstance(value, int | float | dict) or (value and isinstance(value[0], int | float)):
            yield (*where, name), value


def _instead(value, number):
    if isinstance(value, dict):
        return dict.fromkeys(value, number)
    return [number] * len(value) if isinstance(value, tuple) else number


@pytest.mark.parametrize("number", [float("nan"), float("inf"), -1e30, 1e30])
def test_no_distribution_takes_an_absurd_number(number):
    """Whatever field it stands in, a number that is none, endless or absurd is refused with the field's name."""
    base = Scenario(name="x")
    for path, value in _numbers(base):
        wrong = _instead(value, number)
        for name in reversed(path):
            wrong = {name: wrong}
        with pytest.raises(ValidationError) as error:
            Scenario.model_validate({"name": "x", **wrong})
        assert ".".join(path) in str(error.value)


@pytest.mark.parametrize(
    ("wish", "message"),
    [
        ({"label": "cable", "way": "bus"}, "way: that of cable is cable or neighbour, not bus"),
        ({"label": "interference", "kind": "void"}, "kind: says nothing of interference"),
        ({"label": "local", "family": "arc"}, "family: says nothing of local"),
    ],
)
def test_a_source_is_not_told_what_its_label_cannot_have(wish, message):
    """What would be passed over in silence is refused instead."""
    with pytest.raises(ValidationError, match=message):
        SourceEntry.model_validate({"pulses_per_cycle": 1.0, "snr_db": (10.0, 20.0), **wish})


def _unnamed(settings, table, where=""):
    """Names of fields that a table leaves to their defaults."""
    found = []
    for name in type(settings).model_fields:
        value = getattr(settings, name)
        if name not in table:
            found += [] if value is None or value == () else [where + name]
        elif isinstance(value, BaseModel):
            found += _unnamed(value, table[name], f"{where}{name}.")
    return found


def test_the_base_world_is_stated_whole():
    """The base scenario names every distribution, and what it says is what other worlds have by default."""
    path = shipped("synthetic") / "base.toml"
    base = read_scenario(path)
    assert _unnamed(base, tomllib.loads(path.read_text(encoding="utf-8"))) == []
    assert base == Scenario(name="base", circuits=base.circuits)


def test_a_measured_curve_is_looked_for_beside_its_scenario(tmp_path):
    """A utility's own line is named relative to the scenario file."""
    path = tmp_path / "own.toml"
    path.write_text('name = "own"\n[cable]\ncurve = "line.csv"', encoding="utf-8")
    assert read_scenario(path).cable.curve == str(tmp_path / "line.csv")


def test_a_distance_where_there_is_none_is_refused(tmp_path):
    """A distance of a switchgear source, or of one in the cable box, is an error rather than ignored."""
    path = tmp_path / "scenario.toml"
    for label, more in (("switchgear", ""), ("interference", ""), ("local", 'way = "box"\n')):
        path.write_text(NAMED.format(label=label, place=5.0) + more, encoding="utf-8")
        with pytest.raises(InputError, match="distance_m: says nothing of"):
            read_scenario(path)


def test_the_nearest_key_is_looked_for_at_its_place(tmp_path):
    """A mistyped table gets the table's name, not a key of some other table."""
    path = tmp_path / "scenario.toml"
    path.write_text('name = "x"\n[cabel]\nsections = {}', encoding="utf-8")
    with pytest.raises(InputError, match="nearest known one is 'cable'"):
        read_scenario(path)
