"""Baselines that a recording could as well have given: the bootstrap over blocks of subgroups.

Knows sums over blocks. Must not know detectors or run lengths.

A baseline from a resample of the recording errs about the recording's own as the recording's errs
about the truth: so each resample's baseline is held against the recording's own centre and spread.
Blocks are drawn, not single subgroups, since neighbours follow each other (H. R. Künsch 1989, Ann.
Statist. 17).
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from monitor.baselining.estimating import BetweenBy, Estimate, Values
from monitor.baselining.material import StreamSubgroups
from monitor.methods.normal import Array
from monitor.plan import Stream

RESAMPLES = 1_000

_SEED = 7_870
_BLOCKS = 300
_LEAST = 1e-300


@dataclass(frozen=True, slots=True)
class Errors:
    """How wrong each resample's baseline is, shape (RESAMPLES,): the true mean off the baseline's,
    in the baseline's standard errors; the true standard error of a mean over the baseline's; the
    true sigma over the baseline's; the true spread of long means over what the recording makes of
    it, each against that of single ones."""

    shift: Array
    error: Array
    sigma: Array
    inflation: Array


def resampled(
    streams: Mapping[Stream, StreamSubgroups], estimate: Estimate, chosen: Sequence[Stream]
) -> dict[Stream, Errors]:
    """The errors of the baselines of the ``chosen`` streams; always the same for the same input."""
    chance = np.random.default_rng(_SEED)
    # The variance of long means from M lags errs by about √(2(2M + 1)/N) of itself, as one from
    # blocks of 2M + 1 does.
    longest, between = 2 * len(estimate.memory) - 1, estimate.between
    if estimate.differ:
        own = {
            each: _errors(
                _drawn(_blocks(streams[each], longest), chance),
                estimate.by_stream[each],
                between,
            )
            for each in chosen
        }
        # How far means follow each other is estimated from all streams together.
        return {
            each: replace(
                found,
                inflation=found.inflation ** math.sqrt(len(streams[each]) / estimate.subgroups),
            )
            for each, found in own.items()
        }
    blocks = np.concatenate(
        [_blocks(streams[each.stream], longest) for each in estimate.each], axis=1
    )
    together = _errors(_drawn(blocks, chance), estimate.common, between)
    return dict.fromkeys(chosen, together)


_Sums = NDArray[np.float64]
"""Shape (8, m), over m blocks, resamples or whatever: subgroups, Σmean, Σmean², Σ1/n, Σ(n−1)s²,
Σ(n−1); and, over their blocks, Σ(Σmean)² and Σ(subgroups)²."""


def _blocks(stream: StreamSubgroups, longest: int) -> _Sums:
    """Sums over blocks of neighbours, long enough to hold what makes them follow each other."""
    count = len(stream)
    length = max(1, math.ceil(count / _BLOCKS), min(longest, count // 12))
    # About its own centre, so that squares keep their digits.
    centred = stream.mean - stream.mean.mean()
    rows = np.stack(
        (
            np.ones(count),
            centred,
            centred**2,
            1 / stream.n,
            (stream.n - 1) * np.where(stream.n > 1, stream.variance, 0.0),
            stream.n - 1.0,
        )
    )
    edges = np.arange(count // length) * length  # the last block takes what is left over
    blocks = np.add.reduceat(rows, edges, axis=1)
    return np.vstack((blocks, blocks[1] ** 2, blocks[0] ** 2))


def _drawn(blocks: _Sums, chance: np.random.Generator) -> _Sums:
    """The sum of all blocks, then sums of as many drawn from them, for each resample."""
    if blocks.shape[1] > 2 * _BLOCKS:
        edges = np.arange(0, blocks.shape[1], math.ceil(blocks.shape[1] / (2 * _BLOCKS)))
        blocks = np.add.reduceat(blocks, edges, axis=1)
    count = blocks.shape[1]
    # One fewer than there are, so that few blocks do not understate how far a resample strays.
    drawn = chance.multinomial(max(count - 1, 1), np.full(count, 1 / count), RESAMPLES)
    return np.column_stack((blocks.sum(axis=1), blocks @ drawn.T))


def _errors(sums: _Sums, values: Values, between: BetweenBy) -> Errors:
    count, total, squares, inverse, within, freedom, of_blocks, lengths = sums
    mean = total / count
    length = lengths / count
    variance = np.maximum(squares / count - mean**2, 0.0) * count / np.maximum(count - 1, 1.0)
    within = within / np.maximum(freedom, 1.0)
    inverse = inverse / count
    error = np.sqrt(np.maximum(variance, within * inverse))
    truth = error[0]
    # How much too large or small a resample's baseline is, by what it is estimated from.
    by_within = between == "none" and freedom[0] > 0
    strays = np.sqrt(within / within[0]) if by_within else error / truth
    own = values.error(1 / inverse[0]) * np.maximum(strays[1:], 1e-3)
    # Of single readings the spread is that of the means.
    sigma = strays if freedom[0] == 0 else np.sqrt(within / within[0])
    shift = (mean[0] - mean[1:]) / own
    # The mean of a block varies as long means do.
    long = np.sqrt(
        np.maximum(of_blocks / count - length * mean**2, 0.0) / np.maximum(variance, _LEAST)
    )
    inflation = long[0] / np.maximum(long[1:], 1e-3 * max(long[0], _LEAST))
    return Errors(shift, truth / own, 1 / np.maximum(sigma[1:], 1e-3), inflation)
