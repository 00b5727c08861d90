"""The current transformer with its lead against a general circuit simulator: ngspice, by frequency.

Its transmission line has no loss, so the lead's skin effect is left out here.
"""

import shutil
import subprocess
from dataclasses import replace

import numpy as np
import pytest

from pdclass.sim.drawn_chain import ChainRanges, draw_receiver
from pdclass.sim.receiver import sensor_response

pytestmark = pytest.mark.skipif(shutil.which("ngspice") is None, reason="ngspice is not installed")

LEAD_S_PER_M = 5.05e-9


def netlist(receiver, saturation):
    """The strap as one turn on the core, coupled to the winding; everything behind it element by element."""
    part, lead = receiver.transformer, receiver.lead
    inductance = part.magnetising_henry * (1 - saturation)
    return [
        "* written by a test",
        "Istrap 0 strap AC 1",
        f"Lstrap strap 0 {inductance / part.turns**2:.12g}",
        f"Lwinding coil 0 {inductance:.12g}",
        "Kcore Lstrap Lwinding 1",
        f"Cwinding coil 0 {part.winding_farad:.12g}",
        f"Rwinding coil inside {part.winding_ohm:.12g}",
        f"Lleakage inside burden {part.leakage_henry:.12g}",
        f"Rburden burden 0 {part.burden_ohm:.12g}",
        f"Tlead burden 0 in 0 Z0={lead.impedance_ohm:.12g} TD={lead.length_m * LEAD_S_PER_M:.12g}",
        f"Rin in 0 {lead.input_ohm:.12g}",
        f"Cin in 0 {lead.input_farad:.12g}",
        ".ac dec 20 10k 60meg",
        ".control",
        "run",
        "wrdata result.txt v(in)",
        "quit",
        ".endc",
        ".end\n",
    ]


def simulated(receiver, saturation, folder):
    """Frequencies [Hz] and transfer impedance [V/A] by ngspice."""
    (folder / "circuit.cir").write_text("\n".join(netlist(receiver, saturation)))
    command = ["ngspice", "-b", "circuit.cir"]
    ran = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=60, check=False)
    result = folder / "result.txt"
    assert result.exists(), ran.stdout + ran.stderr
    hz, real, imaginary = np.loadtxt(result).T[:3]
    return hz, real + 1j * imaginary


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("saturation", [0.0, 0.5])
def test_transfer_impedance(seed, saturation, tmp_path):
    """Drawn transformers, burdens, leads and inputs, with and without mains current, agree within 1e-5 of the peak."""
    drawn = draw_receiver(ChainRanges(), rng=np.random.default_rng(seed))
    receiver = replace(drawn, lead=replace(drawn.lead, skin_s=0.0))
    hz, theirs = simulated(receiver, saturation, tmp_path)
    ours = sensor_response(receiver, 2j * np.pi * hz, saturation)
    assert hz.size > 70
    assert np.abs(ours - theirs).max() < 1e-5 * np.abs(theirs).max()
