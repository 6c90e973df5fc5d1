"""Everything that can go wrong and be explained: place, value, rule, way out.

One page on purpose. Each exception is picklable (one message each) and knows the exit code the
command line answers with.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True)
class Complaint:
    """One thing wrong with what was given.

    Parameters
    ----------
    place : str
        Where: a dotted plan path, a file, an option.
    got : str
        What was given there, as the user wrote it; empty when nothing was.
    rule : str
        What is expected there.
    way_out : str
        What the user can do about it.
    """

    place: str
    got: str
    rule: str
    way_out: str = ""

    def __str__(self) -> str:
        got = f": got {self.got}" if self.got else ""
        lines = [f"{self.place}{got}", f"    {self.rule}"]
        if self.way_out:
            lines.append(f"    -> {self.way_out}")
        return "\n".join(lines)


class TrapsimError(Exception):
    """Something trapsim can explain; `exit_code` is what the command line answers with."""

    exit_code = 1


class PlanError(TrapsimError):
    """The plan or the command line is wrong; nothing was computed."""

    exit_code = 2

    @classmethod
    def from_complaints(cls, complaints: Sequence[Complaint], source: str = "the plan") -> PlanError:
        count = len(complaints)
        head = f"{source}: {count} thing{'s' if count != 1 else ''} to mend"
        return cls("\n".join([head, *(str(c) for c in complaints)]))

    @classmethod
    def at(cls, place: str, got: str, rule: str, way_out: str = "") -> PlanError:
        return cls(str(Complaint(place, got, rule, way_out)))


class PhysicsRefused(TrapsimError):
    """The physics or the numerics refused: collapse, cloud at the edge, not converged."""

    exit_code = 3

    @classmethod
    def at(cls, place: str, got: str, rule: str, way_out: str = "") -> PhysicsRefused:
        return cls(str(Complaint(place, got, rule, way_out)))


class FileTrouble(TrapsimError):
    """A file or folder could not be read or written."""

    exit_code = 4

    @classmethod
    def at(cls, place: str, got: str, rule: str, way_out: str = "") -> FileTrouble:
        return cls(str(Complaint(place, got, rule, way_out)))


class Interrupted(TrapsimError):
    """Stopped from outside; the state is saved."""

    exit_code = 130


@dataclass(frozen=True)
class Notice:
    """Something the user should know, though nothing stopped.

    Parameters
    ----------
    code : str
        A short fixed word, for programs.
    text : str
        A sentence, for people.
    """

    code: str
    text: str
