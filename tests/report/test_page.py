"""The batch report as a page."""

import dataclasses
import re
from html.parser import HTMLParser

import numpy as np
import pytest
from verdict_samples import pulse_set, scored_shard, staged

from pdclass.report.page import batch_report, percent
from pdclass.report.summary import CAUTIONS, SHORT_CAUTION

HEADINGS = [
    "What was found",
    "Pulses by circuit, sensor and label",
    "Pulses over the phase of the voltage",
    "Example pulses, label by label",
    "Undecided pulses, and why",
    "Beside the planted truth (simulated captures)",
    "Captures and what they could show",
    "What was not checked, and remarks",
    "How to read probabilities, sets and reasons",
    "Digests and versions",
    "Cautions in full",
]
VOID = {"meta", "br", "img", "hr", "link", "input"}


class _Outline(HTMLParser):
    """Collects tags, attributes, text and headings, and checks that tags close in order."""

    def __init__(self):
        super().__init__()
        self.open, self.tags, self.attributes, self.text, self.headings = [], [], [], [], []

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        self.attributes += attrs
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags.append(tag)
        self.attributes += attrs

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.text.append(data)
        if self.open and self.open[-1] == "h2":
            self.headings.append(data)


def _outline(html):
    outline = _Outline()
    outline.feed(html)
    outline.close()
    return outline


@pytest.fixture(scope="module")
def batch(shards, tmp_path_factory):
    """A folder under way and its run record."""
    return staged(tmp_path_factory.mktemp("report"), shards)


@pytest.fixture(scope="module")
def html(batch, bundle, shards):
    """The report with the planted truth of the first capture."""
    return batch_report(*batch, bundle, truth=shards[0].pulses.table["label"], planted={"cable": 44})


def test_sections_stand_in_order_and_tags_close(html):
    """The page is well formed and its sections stand in the stated order."""
    outline = _outline(html)
    assert outline.open == []
    assert outline.headings == HEADINGS


def test_the_page_is_self_contained(html):
    """No script, no event attribute, no request to outside."""
    outline = _outline(html)
    assert not {"script", "iframe", "object", "embed", "link", "img"} & set(outline.tags)
    for name, value in outline.attributes:
        assert not name.startswith("on")
        if name in {"src", "href", "xlink:href"}:
            assert value.startswith("#")
    assert not re.search(r"url\((?!#)", html)
    assert "@import" not in html


def test_names_from_outside_are_escaped(html):
    """A circuit that is called like a tag is shown, not obeyed."""
    assert "<b>Row" not in html
    assert "Crane &lt;b&gt;Row&lt;/b&gt;" in html


def test_the_same_folder_gives_the_same_page(html, batch, bundle, shards):
    """Writing the report twice gives the same bytes."""
    again = batch_report(*batch, bundle, truth=shards[0].pulses.table["label"], planted={"cable": 44})
    assert again == html


def test_cautions_stand_at_the_top_and_in_full_at_the_end(html):
    """The short caution comes before what was found, every caution after everything else."""
    text = " ".join(" ".join(_outline(html).text).split())
    assert text.index(SHORT_CAUTION) < text.index("What was found", text.index("</style>") if "</style>" in text else 0)
    end = text.index("Cautions in full")
    assert all(text.index(caution) > end for caution in CAUTIONS if caution not in text[:end])
    assert all(caution in text[end:] for caution in CAUTIONS)


def test_figures_of_the_batch_are_on_the_page(html, shards, bundle):
    """Counts, limits, digests, the skipped input and what was not checked are all there."""
    text = " ".join(" ".join(_outline(html).text).split())
    assert "2.34 mV" in text
    assert "20.0 ms" in text
    assert bundle.digest in text
    assert all(shard.capture_digest in text for shard in shards)
    assert "skipped: torn.sigmf-data: size" in text
    assert "resolution not checked: the capture does not state it (trained on 12 to 16 bit)" in text
    assert "offset unknown" in text
    assert "No phase is known for these 15 pulses." in text


def test_examples_show_reasons_and_the_class_mix(html, shards):
    """An example's three reasons are on the page word for word, and its probabilities say for which mix."""
    text = " ".join(" ".join(_outline(html).text).split())
    table = shards[0].verdicts.table
    shown = [pulse for pulse in table.index[table["decided"]] if f'id="w{pulse}-' in html]
    assert len(shown) >= 4
    for pulse in shown:
        for reason in table.loc[pulse, ["reason_1", "reason_2", "reason_3"]]:
            assert reason is None or " ".join(reason.split()) in text
    assert "every label taken as equally frequent beforehand" in text


def test_without_planted_truth_there_is_no_comparison(batch, bundle):
    """Only a simulated batch is set beside its truth."""
    assert "planted truth" not in batch_report(*batch, bundle)


def test_a_pulse_table_without_capture_phase_and_noise_has_its_page(bundle, tmp_path):
    """What a foreign table does not know is said or left away; no bare NaN or None reaches the page."""
    pulses = pulse_set(["cable", "local", "interference"] * 4, rng=np.random.default_rng(4))
    unknown = {"capture": None, "sensor": None, "phase_deg": np.nan, "onset_s": np.nan, "snr_db": np.nan}
    bare = dataclasses.replace(pulses, table=pulses.table.assign(**unknown))
    shard = scored_shard(bundle, bare, "quay", sensor=None, duration_s=None, detection_limit_v=None)
    html = batch_report(*staged(tmp_path, [shard]), bundle)
    text = " ".join(" ".join(_outline(html).text).split())
    assert not re.search(r"\b(nan|None|NaT)\b", text.replace("None got", "").replace("None.", ""))
    assert "later echo not excluded" in text
    assert "sensor not stated" in text


def test_a_batch_in_which_nothing_was_found_has_its_page(bundle, tmp_path):
    """Without a single pulse the page still states the captures, their limits and the cautions."""
    nothing = pulse_set(["cable"], rng=np.random.default_rng(4)).take(np.zeros(0, int))
    html = batch_report(*staged(tmp_path, [scored_shard(bundle, nothing, "quay")]), bundle)
    text = " ".join(" ".join(_outline(html).text).split())
    assert "No pulse was found; that does not show that the circuit is healthy." in text
    assert "2.34 mV" in text


def test_no_hype_and_no_severity(html):
    """The page speaks of no severity, no risk score and no artificial intelligence."""
    text = " ".join(_outline(html).text).lower()
    assert not re.search(r"severity|critical|alarm|powerful|state-of-the-art|intelligen|cutting", text)


@pytest.mark.parametrize(
    ("share", "words"),
    [(1.0, "100 %"), (0.99999, ">99.9 %"), (0.5, "50.0 %"), (0.00999, "0.999 %"), (1e-9, "<0.1 %"), (0.0, "0 %")],
)
def test_a_probability_is_never_rounded_to_certainty(share, words):
    """Only a probability of exactly one is 100 %."""
    assert percent(share) == words
