"""What the gallery says of each kind of example, current, way and pattern."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

#: Ways of a source to the strap.
WAYS: Mapping[str, str] = {
    "cable": "on this cable",
    "neighbour": "on a neighbour's cable, over the busbar",
    "stress-cone": "core to screen",
    "box": "core to cable box",
    "bus": "busbar to enclosure",
    "equipment": "at equipment on a dropper",
    "radiated": "radiated into the loops of the station",
    "screen": "conducted on the screen",
    "feeder": "along a neighbour's cable",
    "far-end": "along this cable from its far end",
}


#: Currents of discharges: named after what sends such ones, wherever they are planted.
CURRENTS: Mapping[str, str] = {
    "void": "current as of a void",
    "aged-void": "current as of an aged void",
    "interface": "current as of a discharge at an interface",
    "surface": "current as of a surface discharge",
    "floating": "current as of a spark to a floating part",
}


@dataclass(frozen=True)
class Group:
    """One kind of example: its name after `group_of`, and what the page says of it."""

    name: str
    label: str
    title: str
    words: str


#: Kinds of example in the order in which the page has them.
GROUPS = (
    Group(
        "near",
        "cable",
        "cable, 10 to 100 m away",
        "The first arrival is still steep and the near end answers to it, so that a discharge in the first hundred "
        "metres is not easily told from a local one.",
    ),
    Group(
        "middle",
        "cable",
        "cable, 100 to 500 m away",
        "The edges have become slower, above 10 MHz little is left. What went the other way on this cable comes back "
        "from its far end: with its sign from an open end, reversed from a lower impedance (a busbar with cables). "
        "What went on from the busbar into other cables comes back from their ends and passes the strap the other "
        "way, so that there an open end reverses and a lower impedance does not.",
    ),
    Group(
        "far",
        "cable",
        "cable, beyond 500 m",
        "A smooth, lopsided pulse: the high frequencies stay in the cable, the near end is hardly made to ring.",
    ),
    Group(
        "far end",
        "cable",
        "cable, at its far end",
        "Equipment and termination at the other end of the cable: one whole length travelled, the next arrival two "
        "lengths later.",
    ),
    Group(
        "neighbour",
        "cable",
        "a neighbour's cable",
        "It arrives over the busbar. From one sensor alone it cannot be told from a pulse of this cable.",
    ),
    Group(
        "termination",
        "local",
        "local, at the termination",
        "Nothing travelled: edges are as fast as source and sensor allow. Part of the charge leaves along the cable, "
        "and its echo from the far end looks like a cable pulse.",
    ),
    Group(
        "first metres",
        "local",
        "local, within 10 m of the termination",
        "As before; ten metres there and back are about a tenth of a microsecond.",
    ),
    Group(
        "box",
        "local",
        "local, from core to cable box",
        "The charge does not return by the cable's screen but by the earthed box.",
    ),
    Group(
        "bus",
        "switchgear",
        "switchgear, busbar",
        "The charge shakes the busbar's ladder of inductances and capacitances; its ring is what the strap carries.",
    ),
    Group(
        "equipment",
        "switchgear",
        "switchgear, transformer or bushing on a dropper",
        "The same, with the dropper and its equipment as one more resonant circuit.",
    ),
    Group(
        "converter",
        "interference",
        "interference, converter",
        "Edges of transistors with the ringing of their own circuit, two in every switching period.",
    ),
    Group(
        "thyristor",
        "interference",
        "interference, thyristor bridge",
        "Slower and lower in frequency; locked to the mains, at both ends of each commutation.",
    ),
    Group(
        "switch-mode",
        "interference",
        "interference, switch-mode supply",
        "Near the sensor, fast, in bursts whose spacing is a few microseconds.",
    ),
    Group(
        "arc",
        "interference",
        "interference, arc of a contact or brush",
        "A spark is a spark: the current alone is like a discharge's. What differs is the way it comes.",
    ),
    Group(
        "radio-packet",
        "interference",
        "interference, packet of radio",
        "A transmitter switched on and off, or a contact that rectifies: one frequency under an envelope.",
    ),
    Group(
        "line-corona",
        "interference",
        "interference, corona on an overhead line",
        "A discharge in air, but not of the cable system. Where it arrives along a cable, its waveform cannot tell it "
        "from a distant discharge.",
    ),
    Group(
        "sferic",
        "interference",
        "interference, lightning far away",
        "Microseconds long, little above a few megahertz; leaders send trains of faster pulses.",
    ),
    Group(
        "switching-operation",
        "interference",
        "interference, switching elsewhere",
        "An oscillation of the network that was switched; contacts that pre-strike send many.",
    ),
)
#: What the extraction found where nothing was planted.
CROSSING = Group(
    "background",
    "interference",
    "interference, background that crossed the threshold",
    "Nothing was planted here: noise, carriers and carrier communication where the extraction found a pulse. These "
    "windows have the height that they have, not one that was chosen.",
)
#: Sources by the pattern in which they send.
PATTERN_WORDS: Mapping[str, str] = {
    "void": "void",
    "surface": "surface",
    "floating": "part without potential",
    "corona": "corona, negative point",
    "positive-corona": "corona, positive point",
    "six commutations": "thyristor bridge, both ends of six commutations",
    "twelve commutations": "thyristor bridge, both ends of twelve commutations",
    "converter": "times between the pulses of a converter",
}
