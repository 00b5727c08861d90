"""Maps: what they may say, and one line on each thing that they may not."""

import pytest
from foreign_files import write_map, write_trace_map

from pdclass.capture.maps import parse_classes, read_map, together
from pdclass.errors import InputError


def refusal(path):
    with pytest.raises(InputError) as caught:
        read_map(path)
    message = str(caught.value)
    assert message.startswith(str(path))
    assert "\n" not in message
    return message


def test_a_map_says_what_labels_stand_for(tmp_path):
    """Listed labels give ours or an own class, "" gives none, and what is not listed is an error."""
    given = read_map(write_map(tmp_path))
    assert [given.label_of(word) for word in ("K", "P", "crane", "?", None, "")] == [
        "cable",
        "switchgear",
        "crane drive",
        None,
        None,
        None,
    ]
    assert given.own_classes() == {"crane drive": "interference"}
    with pytest.raises(KeyError):
        given.label_of("Q")


def test_without_labels_the_file_has_ours(tmp_path):
    """A map without a table of labels takes our four and the declared ones, nothing else."""
    text = '[labels]\nK = "cable"\nP = "switchgear"\ncrane = "crane drive"\n"?" = ""\n'
    given = read_map(write_map(tmp_path, (text, "")))
    assert given.label_of("local") == "local"
    assert given.label_of("crane drive") == "crane drive"
    with pytest.raises(KeyError):
        given.label_of("K")


def test_a_label_mapped_to_itself_is_kept_as_an_own_class(tmp_path):
    """Own words may stay, without a declaration; several words may stand for one of them."""
    given = read_map(write_map(tmp_path, ('K = "cable"', 'void = "void"\ncavity = "void"')))
    assert given.label_of("cavity") == "void"
    assert given.own_classes() == {"crane drive": "interference", "void": ""}


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('wave = "mV"', 'wave = "kV"', "units.wave"),
        ('wave = "mV"', 'wave = "count"', "volts_per_count"),
        ('wave = "mV"', 'waves = "mV"', "nearest known one is 'wave'"),
        ('kind = "pulse-per-row"', 'kind = "pulses"', "kind"),
        ('K = "cable"', 'K = "cabel"', "nearest known one is 'cable'"),
        ('"interference"', '"noise"', "kind of one of cable, local, switchgear, interference"),
        ('"crane drive" =', '"undecided" =', "class 'undecided'"),
        ('"crane drive" =', '"a|b" =', "class 'a|b'"),
        ('circuit = "feeder"', "", "circuit is needed"),
        ('session = "visit"', "", "session is needed"),
        ('wave = "s0000:s1499"', "", "columns.wave"),
        ('circuit = "feeder"', 'circuit = "feeder"\nvolts = "x"', "columns.volts"),
        ('sensor = "HF1"', 'sensor = "HF1"\ncircuit = "Quay"', "circuit stands in columns and in fixed"),
        ("onset_sample = 300", "onset_sample = 300\nonset_ns = 3000.0", "onset_sample and onset_ns"),
        ("onset_sample = 300", "onset_sample = -1", "onset_sample"),
        ("rate_hz = 100e6", "", "the rate is needed"),
        ("rate_hz = 100e6", "rate_hz = 0.0", "rate_hz"),
        ("rate_hz = 100e6", "rate_hz = nan", "rate_hz"),
        ('basis = "expert"', 'basis = "guess"', "basis"),
        ('label = "type"\n', "", "basis says how a label came to be known"),
        ('label = "type"\n', "", "give label too"),
        ('sensor = "HF1"', 'sensor = "a\\nb"', "one line of text"),
        ('sensor = "HF1"', 'sensor = "HF1"\nstart_utc = "2031-05-04T00:00:00Z"', "for a trace"),
        ('circuit = "feeder"', 'circuit = "feeder"\ntime = "t"', "units.time is needed"),
        ("[labels]", "[labels", "TOML"),
    ],
)
def test_wrong_maps_of_rows_are_refused_in_one_line(tmp_path, old, new, words):
    """Each thing that a map of rows may not say is named."""
    assert words in refusal(write_map(tmp_path, (old, new)))


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('volts = "ch1"', "", "a trace needs columns.volts"),
        ('volts = "ch1"', 'volts = "ch1"\ncircuit = "c"', "for rows of pulses"),
        ('time = "us"', "", "units.time is needed"),
        ('time = "us"', 'time = "min"', "units.time"),
        ('time = "t_us"\n', "", "the rate is needed"),
        ("mains_hz = 50.0", "onset_sample = 3", "for rows of pulses"),
    ],
)
def test_wrong_maps_of_traces_are_refused_in_one_line(tmp_path, old, new, words):
    """Each thing that a map of a trace may not say is named."""
    assert words in refusal(write_trace_map(tmp_path, (old, new)))


def test_a_label_for_the_whole_file_must_be_listed(tmp_path):
    """fixed.label goes through the same list as those of a column."""
    change = ('label = "type"\n', "")
    assert read_map(write_map(tmp_path, change, ("[labels]", 'label = "K"\n[labels]'))).fixed.label == "K"
    assert "fixed.label 'Z'" in refusal(write_map(tmp_path, change, ("[labels]", 'label = "Z"\n[labels]')))


def test_classes_from_an_option():
    """Names with and without what they are a kind of; anything else is refused, naming the option."""
    assert parse_classes("crane drive=interference, void") == {"crane drive": "interference", "void": ""}
    for text in ("", "void=noise", "cable", "x", "a;b"):
        with pytest.raises(InputError, match="--classes"):
            parse_classes(text)


def test_a_class_is_a_kind_of_one_thing():
    """Sources that agree are joined; two kinds for one class are refused."""
    assert together("here", {"a1": ""}, {"b1": "local", "a1": ""}) == {"a1": "", "b1": "local"}
    with pytest.raises(InputError, match="here: class 'a1'"):
        together("here", {"a1": ""}, {"a1": "local"})
