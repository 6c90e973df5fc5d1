"""Curves between the samples of a track, and which of them are one and the same."""

from __future__ import annotations

import numpy as np

Array = np.ndarray
POINTS_PER_STEP = 16


def smooth(time: Array, values: Array, rates: Array, *, slope: bool = False) -> tuple[Array, Array]:
    """The cubic through the samples with their known rates (Hermite), or its slope.

    A straight line where time stands still (a jump) or where the rates contradict the values (a kick between them).

    Parameters
    ----------
    time, values, rates : ndarray, shape (T,)
        `rates` is the time derivative of `values`.
    slope : bool
        Give the derivative of the curve in place of the curve.

    Returns
    -------
    time, curve : ndarray
    """
    if len(time) < 2:
        return time, rates if slope else values
    step = np.diff(time)
    flowing = step > 0
    secant = np.divide(np.diff(values), step, out=np.zeros_like(step), where=flowing)
    r0, r1 = rates[:-1], rates[1:]
    tallest = np.maximum(np.abs(secant), np.maximum(np.abs(r0), np.abs(r1)))
    honest = flowing & (np.abs(0.5 * (r0 + r1) - secant) <= 0.45 * tallest)
    u = np.linspace(0.0, 1.0, POINTS_PER_STEP, endpoint=False)[:, None]
    v0, v1 = values[:-1], values[1:]
    if slope:
        bent = 6 * (u - u**2) * secant + (1 - u) * (1 - 3 * u) * r0 + u * (3 * u - 2) * r1
        straight = r0 + u * (r1 - r0)
    else:
        bent = v0 + u**2 * (3 - 2 * u) * (v1 - v0) + step * u * (1 - u) * ((1 - u) * r0 - u * r1)
        straight = v0 + u * (v1 - v0)
    between = np.where(honest, bent, straight)
    moments = time[:-1] + u * step
    last = rates[-1] if slope else values[-1]
    return np.append(moments.T.ravel(), time[-1]), np.append(between.T.ravel(), last)


def alike(values: Array, *, tolerance: float = 1e-3, nothing: float = 0.0) -> list[tuple[int, ...]]:
    """Directions whose curves cannot be told apart, together; a direction without values is left out.

    Parameters
    ----------
    values : ndarray, shape (T, 3)
    tolerance : float
        Largest difference, as a share of the largest magnitude of the two curves.
    nothing : float
        A difference that is never seen.
    """
    groups: list[list[int]] = []
    for j in range(values.shape[1]):
        if np.isnan(values[:, j]).all():
            continue
        for group in groups:
            first, this = values[:, group[0]], values[:, j]
            size = np.nanmax(np.abs([first, this]))
            if np.nanmax(np.abs(first - this)) <= max(tolerance * size, nothing):
                group.append(j)
                break
        else:
            groups.append([j])
    return [tuple(group) for group in groups]


def apart(places: Array, gap: float, *, low: float = 0.0, high: float = 1.0) -> Array:
    """Places moved as little as need be so that neighbours are a gap apart and all lie between the limits."""
    order = np.argsort(places, kind="stable")
    moved = np.clip(np.asarray(places, dtype=float)[order], low, high)
    for i in range(1, len(moved)):
        moved[i] = max(moved[i], moved[i - 1] + gap)
    if len(moved) and moved[-1] > high:
        moved[-1] = high
        for i in range(len(moved) - 2, -1, -1):
            moved[i] = min(moved[i], moved[i + 1] - gap)
    out = np.empty_like(moved)
    out[order] = moved
    return out
