"""Simulated captures are whole, repeatable, independent of one another, and give nothing away."""

import hashlib
from collections import defaultdict

import numpy as np
import pytest
from scipy import stats
from sklearn.ensemble import HistGradientBoostingClassifier
from sklearn.metrics import balanced_accuracy_score
from sklearn.model_selection import GroupKFold, cross_val_predict

from pdclass.errors import InputError
from pdclass.pulses import LABELS, phase_deg
from pdclass.settings import shipped
from pdclass.sim.scenario import Scenario, capture_count, circuit_of, read_scenario, simulate_capture

TINY = read_scenario(shipped("synthetic") / "tiny.toml")


@pytest.fixture(scope="module")
def captures():
    return [simulate_capture(TINY, number, seed=5) for number in range(1, capture_count(TINY) + 1)]


def _truth(captures):
    rows = [(capture, annotation) for capture in captures for annotation in capture.annotations]
    snr_db = np.array([float(a.comment.split()[1]) for _, a in rows])
    label = np.array([a.label for _, a in rows])
    return rows, label, snr_db


def test_captures_are_whole(captures):
    """Every capture has its chain, names, truth and the digest of its sample bytes."""
    for number, capture in enumerate(captures, 1):
        assert capture.name == f"tiny-{number:04d}"
        assert capture.counts.size == round(3e-3 * capture.chain.rate_hz)
        assert capture.counts.dtype == (np.int8 if capture.chain.adc_bits == 8 else np.int16)
        assert not capture.counts.flags.writeable
        assert capture.digest == hashlib.sha256(capture.counts.tobytes()).hexdigest()
        low_hz, high_hz = capture.chain.band_hz
        assert 20e3 < low_hz < 400e3
        assert 5e6 < high_hz < 50e6
        assert 10 <= len(capture.annotations) <= 30
        onsets = [annotation.onset_sample for annotation in capture.annotations]
        assert onsets == sorted(onsets)
        for annotation in capture.annotations:
            assert annotation.label in LABELS
            assert annotation.basis == "simulated"
            assert annotation.onset_sample >= 0
            assert annotation.onset_sample + annotation.sample_count <= capture.counts.size
    assert {a.label for c in captures for a in c.annotations} == set(LABELS)


def test_twice_is_the_same_bytes(captures):
    """The same scenario, number and seed give the same capture, another seed another one."""
    again = simulate_capture(TINY, 3, seed=5)
    assert again.digest == captures[2].digest
    assert again.annotations == captures[2].annotations
    assert simulate_capture(TINY, 3, seed=6).digest != again.digest


def test_a_capture_does_not_depend_on_the_others(captures):
    """Capture 5 of a world of five is capture 5 of a world of hundreds."""
    fewer = simulate_capture(TINY.model_copy(update={"circuits": 5}), 5, seed=5)
    assert fewer.digest == captures[4].digest


def test_circuits_are_groups_of_their_own(captures):
    """In a drawn world no two circuits share a name, a site or a sensor."""
    for names in ([c.circuit for c in captures], [c.site for c in captures], [c.sensor for c in captures]):
        assert len(set(names)) == len(captures)


def test_a_second_session_is_the_same_circuit():
    """Another visit has the same sensor, sources and places, other pulses and another day."""
    world = TINY.model_copy(update={"captures_per_circuit": 2})
    one, two = (simulate_capture(world, number, seed=5) for number in (3, 4))
    assert (one.circuit, one.chain) == (two.circuit, two.chain)
    assert one.session != two.session
    assert one.digest != two.digest
    places = [{(a.label, a.distance_m) for a in capture.annotations} for capture in (one, two)]
    assert len(places[0] & places[1]) >= 3


def test_heights_have_one_law(captures):
    """Peak over noise is even in every class, from 8 dB to 58 dB or to 3 dB over the circuit's full scale."""
    rows, label, snr_db = _truth(captures)
    full = {c.name: c for c in (circuit_of(TINY, number, seed=5) for number in range(1, len(captures) + 1))}
    top = np.array([min(58.0, full[capture.circuit].full_scale_db + 3.0) for capture, _ in rows])
    place = (snr_db - 8.0) / (top - 8.0)
    assert place.min() > -0.01
    assert place.max() < 1.01
    for name in LABELS:
        assert stats.kstest(place[label == name], stats.uniform(0, 1).cdf).pvalue > 1e-3


def test_nothing_gives_the_class_away(captures):
    """What carries no information about the source does not tell the class of a pulse on another circuit."""
    rows, label, snr_db = _truth(captures)
    nuisance = np.array(
        [
            [
                annotation.onset_sample / capture.counts.size,
                annotation.onset_sample % 2,
                annotation.onset_sample % 16,
                phase_deg(capture, np.array([annotation.onset_sample]))[0],
                snr,
                capture.chain.rate_hz,
                capture.chain.adc_bits,
                capture.chain.volts_per_count,
                *capture.chain.band_hz,
                capture.counts[:1000].std(),
                capture.counts.mean(),
            ]
            for (capture, annotation), snr in zip(rows, snr_db, strict=True)
        ]
    )
    groups = np.array([capture.circuit for capture, _ in rows])
    model = HistGradientBoostingClassifier(max_iter=40, random_state=0)
    guessed = cross_val_predict(model, nuisance, label, groups=groups, cv=GroupKFold(4))
    assert balanced_accuracy_score(label, guessed) < 0.33


def test_what_stands_before_a_pulse_does_not_give_it_away():
    """Samples before a pulse with nothing planted in the 75 us before it do not tell its class on another circuit."""
    rows, label, groups = [], [], []
    for number in range(1, 61):
        capture = simulate_capture(TINY, number, seed=7)
        per_us = capture.chain.rate_hz / 1e6
        onsets = np.array([annotation.onset_sample for annotation in capture.annotations])
        clear = np.flatnonzero(np.diff(onsets, prepend=-(10**9)) > 75 * per_us)
        for annotation in (capture.annotations[place] for place in clear):
            end = annotation.onset_sample - round(0.5 * per_us)
            before = capture.counts[max(end - round(5 * per_us), 0) : end].astype(float)
            if before.size > 100:
                rows.append([before.mean(), before.std(), np.ptp(before), *before[-8:], *np.diff(before)[-8:]])
                label.append(annotation.label)
                groups.append(capture.circuit)
    model = HistGradientBoostingClassifier(max_iter=40, random_state=0)
    guessed = cross_val_predict(model, np.array(rows), np.array(label), groups=np.array(groups), cv=GroupKFold(4))
    assert len(rows) > 300
    assert balanced_accuracy_score(label, guessed) < 0.32


def test_both_polarities_in_every_class(captures):
    """The sign of the first large excursion is no mark of a class."""
    signs = defaultdict(list)
    for capture in captures:
        for annotation in capture.annotations:
            wave = capture.counts[annotation.onset_sample :][:400].astype(float)
            signs[annotation.label].append(np.sign(wave[np.argmax(np.abs(wave))]))
    for name in LABELS:
        assert 0.3 < np.mean(np.array(signs[name]) > 0) < 0.7


def test_pulses_stand_where_they_are_said_to(captures):
    """Above 26 dB the record leaves its noise within 0.5 us of every stated onset."""
    for capture in captures[:8]:
        deviation = 1.4826 * np.median(np.abs(capture.counts - np.median(capture.counts)))
        for annotation in capture.annotations:
            if float(annotation.comment.split()[1]) > 26:
                reach = int(1.5e-6 * capture.chain.rate_hz)
                wave = capture.counts[annotation.onset_sample :][:reach].astype(float)
                assert wave.size < reach or np.abs(wave).max() > 3 * deviation


def test_no_pulses_is_background_alone():
    """A capture without pulses has noise and no annotation; with a hundred it has up to a hundred."""
    empty = simulate_capture(TINY, 2, seed=5, pulses=0)
    assert empty.annotations == ()
    assert empty.counts.std() > 0
    assert 60 <= len(simulate_capture(TINY, 2, seed=5, pulses=100).annotations) <= 100


def test_phase_marks_tell_the_phase_over_gaps():
    """Segments have gaps in the global index, and the phase goes on through them."""
    capture_ranges = TINY.capture.model_copy(update={"segments": 3, "duration_ms": 30.0})
    capture = simulate_capture(TINY.model_copy(update={"capture": capture_ranges}), 1, seed=5)
    chain = capture.chain
    assert len(capture.segments) == 3
    gaps = capture.segments[:, 1] - capture.segments[:, 0]
    assert gaps.tolist() == [0, round(5e-3 * chain.rate_hz), round(10e-3 * chain.rate_hz)]
    sample = np.array([1000, capture.segments[2, 0] + 1000])
    seen = phase_deg(capture, sample)
    turned = 360 * chain.mains_hz * (20e-3 + 10e-3)
    assert np.mod(seen[1] - seen[0] - turned + 180, 360) - 180 == pytest.approx(0, abs=0.01)


def test_marks_stand_at_every_cycle():
    """The mark of a cycle is the first sample after the rising zero crossing."""
    ranges = TINY.capture.model_copy(update={"duration_ms": 70.0})
    chain = TINY.chain.model_copy(update={"mains_hz": (50.0,), "rates_hz": (62.5e6,)})
    capture = simulate_capture(TINY.model_copy(update={"capture": ranges, "chain": chain}), 1, seed=5)
    assert 4 <= len(capture.phase_marks) <= 5
    beyond = np.mod(capture.phase_marks[1:, 1], 360.0)
    assert (beyond < 360 * 50 / 62.5e6).all()


@pytest.mark.parametrize(("field", "given"), [("number", 0), ("seed", -1), ("pulses", -3)])
def test_wrong_numbers_are_refused(field, given):
    """A number below its bound is one clear line."""
    asked = {"number": 1, "seed": 0, "pulses": None, field: given}
    with pytest.raises(InputError, match=f"found {given}"):
        simulate_capture(TINY, asked["number"], seed=asked["seed"], pulses=asked["pulses"])


def test_port_ferrow_is_the_promised_district():
    """Four circuits, three cycles of two million samples each, with the sources that the scenario names."""
    ferrow = read_scenario(shipped("synthetic") / "port-ferrow.toml")
    assert capture_count(ferrow) == 4
    capture = simulate_capture(ferrow, 1, seed=1)
    assert (capture.circuit, capture.counts.size) == ("Quay Road", 6_000_000)
    joint = [a for a in capture.annotations if a.label == "cable"]
    assert {a.distance_m for a in joint} == {1400.0}
    assert 50 <= len(joint) <= 120
    bunches = np.mod(phase_deg(capture, np.array([a.onset_sample for a in joint])), 180)
    assert (bunches < 90).mean() > 0.75


def test_a_circuit_without_sources_is_silent():
    """A named circuit may be healthy."""
    world = Scenario(name="calm", circuit=({"name": "Calm", "sensor": "s", "length_m": 300.0},))
    assert simulate_capture(world, 1, seed=1).annotations == ()
