"""The whitening filter itself: 64 taps, written so that a vector loaded from memory serves four taps.

A plain loop over shifted views is held up by its loads, most of which straddle two lines of the cache. Here 96 outputs
are summed in registers: a load that lies a vector further is the same signal for the next group of taps. Products are
rounded before they are added and every output has one order of sums, so that its bits are those of `_one_by_one`
wherever it stands and whatever the processor.
"""

from __future__ import annotations

from typing import Any

from llvmlite import ir
from numba import types
from numba.extending import intrinsic

from pdclass.compiled import compiled
from pdclass.pulses import WaveArray

TAPS = 64
_LANES = 16
_GROUPS = TAPS // _LANES
_BLOCKS = 6
#: Outputs of one tile.
TILE = _BLOCKS * _LANES
_VECTOR = ir.VectorType(ir.FloatType(), _LANES)


def _place(builder: Any, base: Any, place: int) -> Any:
    return builder.gep(base, [ir.Constant(ir.IntType(64), place)])


def _spread(builder: Any, scalar: Any) -> Any:
    """A vector with one number in all of its lanes."""
    blank = ir.Constant(_VECTOR, ir.Undefined)
    first = builder.insert_element(blank, scalar, ir.Constant(ir.IntType(32), 0))
    return builder.shuffle_vector(first, blank, ir.Constant(ir.VectorType(ir.IntType(32), _LANES), [0] * _LANES))


def _sums(builder: Any, source: Any, weights: Any) -> list[Any]:
    """The code that sums a tile: lane by lane of the taps' groups, groups in order."""
    sums: list[Any] = [None] * _BLOCKS
    for lane in range(_LANES):
        places = [TAPS - 1 - lane - _LANES * group for group in range(_GROUPS)]
        taps = [_spread(builder, builder.load(_place(builder, weights, place))) for place in places]
        for step in range(_BLOCKS + _GROUPS - 1):
            shifted = builder.bitcast(_place(builder, source, lane + _LANES * step), _VECTOR.as_pointer())
            loaded = builder.load(shifted, align=4)
            for block in range(max(0, step - _GROUPS + 1), min(_BLOCKS, step + 1)):
                term = builder.fmul(taps[step - block], loaded)
                sums[block] = term if sums[block] is None else builder.fadd(sums[block], term)
    return sums


def _tile(typing: Any, signal: Any, taps: Any, out: Any, at: Any) -> Any:  # noqa: ARG001 - numba's form
    """Outputs `at` to `at` + 96 of a filter; the arrays are contiguous float32."""

    def generate(context: Any, builder: Any, signature: Any, given: Any) -> Any:
        arrays = zip(signature.args[:3], given[:3], strict=True)
        source, weights, sink = (context.make_array(kind)(context, builder, array).data for kind, array in arrays)
        own, target = builder.gep(source, [given[3]]), builder.gep(sink, [given[3]])
        for block, total in enumerate(_sums(builder, own, weights)):
            place = builder.bitcast(_place(builder, target, _LANES * block), _VECTOR.as_pointer())
            builder.store(total, place, align=4)
        return context.get_dummy_value()

    return types.void(signal, taps, out, types.int64), generate


_write_tile: Any = intrinsic(_tile)


@compiled
def _one_by_one(signal: WaveArray, taps: WaveArray, out: WaveArray) -> None:  # pragma: no cover - compiled
    for i in range(out.size):
        out[i] = taps[TAPS - 1] * signal[i]
        for lane in range(_LANES):
            for group in range(_GROUPS):
                place = lane + _LANES * group
                if place:
                    out[i] += taps[TAPS - 1 - place] * signal[i + place]


@compiled
def filter_into(signal: WaveArray, taps: WaveArray, out: WaveArray) -> None:  # pragma: no cover - compiled
    """Write `out[i] = sum_k taps[k] signal[i + 63 - k]`.

    Parameters
    ----------
    signal : (outputs + 63,) contiguous float32.
    taps : (64,) contiguous float32.
    out : (outputs,) contiguous float32.
    """
    if out.size < TILE:
        _one_by_one(signal, taps, out)
        return
    for at in range(0, out.size - TILE + 1, TILE):
        _write_tile(signal, taps, out, at)
    _write_tile(signal, taps, out, out.size - TILE)
