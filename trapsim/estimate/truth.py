"""How wrong the numerics were: a run beside its repetition on a finer space with a tighter tolerance."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence

from trapsim.record.summary import Certificate, Difference, Moment, Number, Overestimate, SpaceFigures, Summary

#: an estimate below this share of the truth is not an estimate any more
LEAST = 0.2


def certificate(run: Summary, finer: Summary, *, tolerance: float) -> Certificate:
    """What the finer run says about the other one.

    Parameters
    ----------
    run, finer : Summary
        Of the same plan.
    tolerance : float
        L2 error of the wave function per step in flight, of the finer run.
    """
    truth, told = difference(run, finer), run.numerics.error
    return Certificate(
        space=SpaceFigures(finer.numerics.axes, finer.numerics.points),
        tolerance=tolerance,
        difference=truth,
        estimate_over_truth=Overestimate(
            _over(told.width_relative, truth.width_relative), _over(told.rate_relative, truth.rate_relative),
            _over(told.centre_um, truth.centre_um), _over(told.orders, truth.orders),
        ),
        seconds=finer.numerics.seconds,
    )  # fmt: skip


def difference(run: Summary, finer: Summary) -> Difference:
    """By how much two runs of a plan differ, the worst in each quantity."""
    ends = [(a.end, b.end) for a, b in zip(run.stages, finer.stages, strict=True) if a.end and b.end]
    widths = [(a.width_um, b.width_um) for a, b in ends] or [(run.ground.width_um, finer.ground.width_um)]
    return Difference(
        width_relative=_worst(_share(x, y, y) for a, b in widths for x, y in zip(a, b, strict=True)),
        rate_relative=_rates(*ends[-1]) if ends else None,
        centre_um=_worst(_share(x, y, 1.0) for a, b in ends for x, y in zip(a.centre_um, b.centre_um, strict=True)),
        orders=_worst(share for a, b in ends for share in _orders(a, b)),
        picture_atoms_relative=_worst(
            _share(p.atoms, q.atoms, finer.end.atoms)
            for p, q in zip(run.pictures, finer.pictures, strict=True) if finer.end
        ),
    )  # fmt: skip


def _rates(run: Moment, finer: Moment) -> Number:
    rates = (run.expansion_rate_mm_per_s, finer.expansion_rate_mm_per_s, finer.velocity_spread_mm_per_s)
    return _worst(_share(x, y, spread) for x, y, spread in zip(*rates, strict=True))


def _orders(run: Moment, finer: Moment) -> Iterator[Number]:
    for part, there in (finer.orders or {}).items():
        here = (run.orders or {}).get(part, {})
        yield from (abs(here.get(name, 0.0) - there.get(name, 0.0)) for name in {*here, *there})


def _share(one: Number, other: Number, scale: Number) -> Number:
    return abs(one - other) / scale if one is not None and other is not None and scale else None


def _worst(values: Iterable[Number]) -> Number:
    return max((v for v in values if v is not None), default=None)


def _over(told: Number, truth: Number) -> Number:
    return told / truth if told is not None and truth else None


def missed(certified: Certificate) -> Sequence[str]:
    """The quantities whose estimate is less than a fifth of the difference that was found."""
    over = certified.estimate_over_truth.as_dict()
    return [name for name, ratio in over.items() if ratio is not None and ratio < LEAST]

