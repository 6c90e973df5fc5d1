"""A certificate: the plan once more on a finer space with a tighter tolerance, and how far the first result was off."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from trapsim.corridor import folder as place
from trapsim.errors import Interrupted, Notice, PhysicsRefused, PlanError
from trapsim.estimate.truth import certificate
from trapsim.plan.plan import Plan
from trapsim.prepare.extent import ACCURACY, finer_than
from trapsim.record.store import write_summary
from trapsim.record.summary import Run, Summary

#: code of the notice that says why there is no certificate
NONE = "not_certified"


def finer_plan(plan: Plan) -> Plan:
    """The same plan at an accuracy that outdoes its own; with a key of its own."""
    return replace(plan, numerics=replace(plan.numerics, accuracy=finer_than(plan.numerics.accuracy)))


def certified(done: Run, play: Callable[[Plan, Path | None], Run]) -> Run:
    """A finished run with its certificate; where the finer run is refused, with a notice that says why.

    In a folder the finer run has a place of its own while it is at work, so that it can be taken up again.

    Parameters
    ----------
    done : Run
    play : callable
        Plays a plan in a folder, or in memory.

    Raises
    ------
    Interrupted
        When the finer run was interrupted; the first result stays as it was.
    """
    work = None if done.folder is None else done.folder / place.CERTIFICATE
    if done.summary.numerics.certified is not None and not (work and work.exists()):
        return done
    if done.folder is not None:
        place.drop_damaged_certificate(done.folder)
    summary = _without_notice(done.summary)
    plan = finer_plan(done.plan)
    try:
        finer = play(plan, work)
    except Interrupted as stopped:
        raise Interrupted(f"while certifying, {stopped}\n    the result itself is complete") from stopped
    except (PlanError, PhysicsRefused) as refused:
        summary = replace(summary, warnings=(*summary.warnings, _notice(str(refused))))
    except MemoryError:
        summary = replace(summary, warnings=(*summary.warnings, _notice("there is not enough memory for it")))
    else:
        found = certificate(done.summary, finer.summary, tolerance=ACCURACY[plan.numerics.accuracy].tolerance)
        summary = replace(summary, numerics=replace(summary.numerics, certified=found))
    if done.folder is not None:
        write_summary(done.folder, summary)
        place.discard_certificate(done.folder)
    return replace(done, summary=summary)


def _notice(why: str) -> Notice:
    told = " ".join(why.split())
    return Notice(NONE, f"there is no certificate, because the finer run was refused; the estimates stand alone: {told}")


def _without_notice(summary: Summary) -> Summary:
    return replace(summary, warnings=tuple(n for n in summary.warnings if n.code != NONE))
