"""Acceptance by measurement against two limits with sigma unknown: a band of chances.

A lot passes when ``(upper - mean) / s`` and ``(mean - lower) / s`` are both at least k. The fraction p
outside the limits does not fix the chance: it also matters how p is split between the limits. `share` is the
part of p beyond the upper one. In units of sigma the limits then lie z_u above and z_l below the mean (z the
normal quantiles of both parts), and with y = s / sigma

    P(pass) = integral of [Phi(sqrt(n) (z_u - k y)) - Phi(-sqrt(n) (z_l - k y))] f(y) dy

up to the y = (z_u + z_l) / 2k beyond which no mean passes; the same difference, turned round and integrated
from there on, is the chance that both limits fail it. Either integrand has one peak and a concave logarithm.

The extremes of the band are searched over the split: on a grid, which is then refined around the best place.
The least chance to pass was always met at an end, with p on one side or halved; the greatest may lie between.

Relative error of a chance at a given split: at most 1e-10; of the extremes as the search finds them: 1e-8.

References
----------
S. Bruhn-Suhr and W. Krumbholz, Statistical Papers 31 (1990), 195-207 (from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special  # noqa: TID251 - logarithms of the normal law

from steelyard.core.parameter import Floats
from steelyard.core.quality_index import unknown
from steelyard.core.tails_continuous import normal_quantile
from steelyard.core.tails_noncentral import density_factor, student_at_most

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(48)
_GRID = np.linspace(0.0, 1.0, 48)
_ROUNDS, _ENOUGH = 3, _GRID.size // 3  # looks, finer and finer, until the integrand fills such a part
_DROP, _STEP = 42.0, 9.0
_LEAST_K, _LEAST_Y, _LAST_Y = 1e-9, 1e-12, 1e6
_SHARES = np.concatenate([[0.0], np.geomspace(1e-6, 0.5, 14)])
_FEW_SHARES = np.array([0.0, 0.001, 0.03, 0.2, 0.5])
_WIDTH = float(np.log(_SHARES[2] / _SHARES[1]))
_ZOOMS, _PLACES = 3, np.linspace(-1.0, 1.0, 9)


def chance(n: ArrayLike, k: ArrayLike, p: ArrayLike, share: ArrayLike, passing: bool) -> Floats:
    """Return the chance that a lot passes, or fails, for a given split of its fraction outside.

    Parameters
    ----------
    n : array_like
        At least 2.
    k : array_like
    p : array_like
        The fraction outside both limits, strictly between 0 and 1.
    share : array_like
        The part of it above the upper limit, from 0 to 1.
    passing : bool

    Examples
    --------
    >>> [round(float(chance(20, 1.8, 0.02, share, True)), 3) for share in (0.0, 0.1, 0.5)]
    [0.777, 0.809, 0.875]
    """
    n, k, p, share = np.broadcast_arrays(*(np.asarray(value, dtype=float) for value in (n, k, p, share)))
    share = np.minimum(share, 1 - share)
    one_limit = np.asarray(share == 0)
    if one_limit.all():
        return unknown(n, k, p, passing)
    part = np.where(one_limit, 0.5, share)
    found = _split(n, k, -normal_quantile(part * p), -normal_quantile((1 - part) * p), passing)
    found = np.clip(found, 0.0, 1.0)
    return np.where(one_limit, unknown(n, k, p, passing), found) if one_limit.any() else found


def extreme(n: ArrayLike, k: ArrayLike, p: ArrayLike, greatest: bool, passing: bool) -> Floats:
    """Return the greatest or the least chance to pass, or to fail, over all splits of the fraction.

    Examples
    --------
    >>> [round(float(extreme(20, 1.8, 0.02, greatest, True)), 3) for greatest in (False, True)]
    [0.777, 0.875]
    """
    spread = np.broadcast_arrays(n, k, p)
    columns = [np.ravel(value).astype(float)[:, None] for value in spread]
    inner, sign = greatest == passing, 1.0 if greatest else -1.0  # an extreme that may lie between the ends
    shares = _SHARES if inner else _FEW_SHARES
    found = sign * chance(columns[0], columns[1], columns[2], shares, passing)
    best, place = found.max(axis=-1), found.argmax(axis=-1)
    between = inner & (place > 0)
    if between.any():
        part, around = [column[between] for column in columns], np.log(shares[place[between]])
        best[between] = np.maximum(best[between], _peak(part, around, sign, passing))
    return np.reshape(sign * best, spread[0].shape)


def _peak(columns: list[Floats], place: Floats, sign: float, passing: bool) -> Floats:
    """Return the greatest value around places on a logarithmic scale of shares, finer and finer."""
    place, width = place[..., None], _WIDTH
    for _ in range(_ZOOMS):
        places = np.minimum(place + width * _PLACES, np.log(0.5))
        found = sign * chance(columns[0], columns[1], columns[2], np.exp(places), passing)
        top = np.clip(found.argmax(axis=-1)[..., None], 1, _PLACES.size - 2)
        place, width = np.take_along_axis(places, top, -1), width * (_PLACES[1] - _PLACES[0])
    return np.asarray(np.maximum(found.max(axis=-1), _vertex(found, top)))


def _vertex(values: Floats, top: NDArray[np.intp]) -> Floats:
    """Return the height of the parabola through the greatest value and its neighbours."""
    before, at, after = (np.take_along_axis(values, top + step, -1)[..., 0] for step in (-1, 0, 1))
    bend = before - 2 * at + after
    inside = (at > before) & (at > after)
    return np.where(inside, at - (after - before) ** 2 / (8 * np.where(inside, bend, -1.0)), at)


def _split(n: Floats, k: Floats, above: Floats, below: Floats, passing: bool) -> Floats:
    """Return the chance for limits `above` and `below` the mean, in standard deviations."""
    k = np.where(np.abs(k) < _LEAST_K, _LEAST_K, k)
    near, far = np.minimum(above, below), np.maximum(above, below)
    last = np.where(k > 0, np.clip((above + below) / (2 * np.abs(k)), _LEAST_Y, _LAST_Y), _LAST_Y)
    tail = np.sqrt(4 * _DROP / (n - 1))  # so far beyond 1, or beyond its peak, the integrand is negligible
    if passing:
        peak = np.where(k > 0, 1.0, np.maximum(1.0, near / k))
        return _integral(n, k, above, below, np.full(n.shape, _LEAST_Y), np.minimum(last, peak + tail), near)
    either = sum(student_at_most(np.sqrt(n) * k, n - 1, np.sqrt(n) * limit) for limit in (near, far))
    if (k < 0).all():
        return np.asarray(either)
    both = _integral(n, k, above, below, last, np.maximum(last, 1.0) + tail, far)
    return np.asarray(either - np.where(k > 0, both, 0.0))


def _integral(
    n: Floats, k: Floats, above: Floats, below: Floats, start: Floats, stop: Floats, step: Floats
) -> Floats:
    """Integrate the density of y times the chance, given y, over the part where it is not negligible."""
    columns = [value[..., None] for value in (n, k, above, below)]
    for _ in range(_ROUNDS):
        grid = start[..., None] + (stop - start)[..., None] * _GRID
        weight = _log_weight(grid, *columns)
        heavy = weight >= weight.max(axis=-1, keepdims=True) - _DROP
        first, last = heavy.argmax(axis=-1), heavy.shape[-1] - 1 - heavy[..., ::-1].argmax(axis=-1)
        ends = np.maximum(first - 1, 0), np.minimum(last + 1, heavy.shape[-1] - 1)
        start, stop = (np.take_along_axis(grid, end[..., None], -1)[..., 0] for end in ends)
        if (ends[1] - ends[0]).min() > _ENOUGH:
            break
    cuts = np.sort([(step + sign * _STEP / np.sqrt(n)) / k for sign in (-1, 1)], axis=0)
    edges = np.array([start, *(np.clip(cut, start, stop) for cut in cuts), stop])
    half, middle = (edges[1:] - edges[:-1]) / 2, (edges[1:] + edges[:-1]) / 2
    nodes = middle[..., None] + half[..., None] * _NODES
    values = np.exp(_log_weight(nodes, *columns))
    return np.asarray(((values * _WEIGHTS).sum(axis=-1) * half).sum(axis=0) * density_factor(n - 1))


def _log_weight(y: Floats, n: Floats, k: Floats, above: Floats, below: Floats) -> Floats:
    """Return the logarithm of the density of y, but for its factor, times the chance given y."""
    root, df = np.sqrt(n), n - 1
    upper, lower = root * (above - k * y), -root * (below - k * y)
    high, low = np.maximum(upper, lower), np.minimum(upper, lower)
    turned = high + low > 0  # the difference of the smaller tails
    high, low = np.where(turned, -low, high), np.where(turned, -high, low)
    log_high = special.log_ndtr(high)
    with np.errstate(divide="ignore"):
        difference = log_high + np.log(-np.expm1(special.log_ndtr(low) - log_high))
    return np.asarray(difference + (df - 1) * np.log(y) - df * (y * y - 1) / 2)
