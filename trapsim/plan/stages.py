"""The steps of a sequence: hold, ramp, pulse, kick, release."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

from trapsim.errors import Complaint
from trapsim.fields import Triple, entry
from trapsim.quantities import human
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import Part

SHAPES = ("linear", "smooth", "exponential")
SUDDEN = "sudden"

#: two times this close (relative) are the same time, however they were added up
_ROUNDING = 1e-12
#: an exponential has died after this many time constants: exp(-40) is 4e-18
_DEAD = 40.0

_LONGER = "write a longer time, or take the stage out"
_SHAPE = "how the values change: straight, with zero slope at both ends, or decaying towards the new value"
_TIME_CONSTANT = "of an exponential shape; what is left at the end is jumped"


@dataclass(frozen=True)
class Switches:
    """Which parts are on at the moment (their strength), and which ever were."""

    now: Mapping[str, float]
    ever: frozenset[str]

    def after(self, strengths: Mapping[str, float]) -> Switches:
        """The same with some strengths changed."""
        on = {name for name, strength in strengths.items() if strength > 0}
        return Switches({**self.now, **strengths}, self.ever | on)


@dataclass(frozen=True, kw_only=True)
class Change:
    """A new value of one entry, with a timing of its own if it is written as a table."""

    value: Any = entry("target", "the new value, written like the entry itself")
    delay: float = entry("time", "when the change begins, from the start of the stage", default=0.0, low=0.0)
    duration: float | None = entry(
        "time", "how long it takes; by default until the end of the stage", default=None, above=0.0
    )
    shape: str | None = entry("choice", "by default that of the stage; a pulse has none", default=None, choices=SHAPES)
    time_constant: float | None = entry("time", _TIME_CONSTANT, default=None, above=0.0)


@dataclass(frozen=True, kw_only=True)
class SwitchOff:
    """How the trap dies away after a release: a factor on its potential energy."""

    shape: str = entry("choice", "how the factor falls from 1 to 0", default="linear", choices=SHAPES)
    duration: float | None = entry(
        "time", "how long it takes; an exponential ends after forty time constants by default", default=None, above=0.0
    )
    time_constant: float | None = entry("time", _TIME_CONSTANT, default=None, above=0.0)


@dataclass(frozen=True, kw_only=True)
class Stage:
    """One step of the sequence.

    Every member of the family has a `kind`, a `name`, a `duration` in s (0 for a kick) and
    `pictures`, the times from its start at which pictures are taken (empty when none are asked).
    """

    kind: ClassVar[str] = ""

    name: str = entry("text", "what results call it; by default its kind, then hold_2 and so on", default="")
    pictures: tuple[float, ...] = entry(
        "time", "when pictures are taken, from the start of the stage; by default at the end of a release only", default=(),
        count=None, low=0.0,
    )

    def settled(self, place: str, parts: Mapping[str, Part], switches: Switches) -> tuple[Stage, list[Complaint]]:
        """The stage with its defaults filled in, and a complaint for all that does not fit together."""
        complaints = [
            Complaint(f"{place}.pictures[{i}]", human(time, "time"),
                      f"the stage ends at {human(self.duration, 'time')}", "ask for an earlier time")
            for i, time in enumerate(self.pictures) if time > self.duration * (1 + _ROUNDING)
        ]
        pictures = tuple(sorted({min(time, self.duration) for time in self.pictures}))
        return dataclasses.replace(self, pictures=pictures), complaints

    def switched(self, switches: Switches, parts: Mapping[str, Part]) -> Switches:
        """Which parts are on after the stage."""
        return switches


@dataclass(frozen=True, kw_only=True)
class Hold(Stage):
    """Everything stays as it is, the cloud moves."""

    kind: ClassVar[str] = "hold"

    duration: float = entry("time", "how long", above=0.0, way_out=_LONGER)


@dataclass(frozen=True, kw_only=True)
class Ramp(Stage):
    """From the present values to new ones."""

    kind: ClassVar[str] = "ramp"

    duration: float = entry(
        "time", "how long", above=0.0, way_out="write a longer time; to jump, use a very short one such as \"1 us\""
    )
    shape: str = entry("choice", _SHAPE, default="linear", choices=SHAPES)
    time_constant: float | None = entry("time", _TIME_CONSTANT, default=None, above=0.0)
    to: Mapping[str, Change] = entry(
        "changes", "new values by path, such as \"dipole.frequency\" = [...]; or { value, delay, duration, shape }",
        of=Change,
    )

    def settled(self, place: str, parts: Mapping[str, Part], switches: Switches) -> tuple[Ramp, list[Complaint]]:
        stage, complaints = super().settled(place, parts, switches)
        complaints += _exponential(place, self, unused=self.time_constant is not None and not any(
            (change.shape or self.shape) == "exponential" and change.time_constant is None
            for change in self.to.values()
        ))
        to = {}
        for target, change in self.to.items():
            spot = f"{place}.to.{target}"
            change, wrong = _timed(change, spot, self.duration)
            shape = change.shape or self.shape
            own = change.time_constant or (self.time_constant if shape == "exponential" else None)
            change = dataclasses.replace(change, shape=shape, time_constant=own)
            if shape != self.shape or change.time_constant != self.time_constant:
                wrong += _exponential(spot, change, unused=own is not None and shape != "exponential")
            complaints += wrong + _centre_taken(target, spot, parts) + self._is_off(target, spot, switches)
            to[target] = change
        return dataclasses.replace(stage, to=to), complaints + _unfit(to, place, parts)

    def _is_off(self, target: str, spot: str, switches: Switches) -> list[Complaint]:
        """A ramp of a part that has never been on changes nothing."""
        name, _, key = target.partition(".")
        switch = self.to.get(f"{name}.strength")
        if key == "strength" or switches.now.get(name, 1.0) > 0 or name in switches.ever:
            return []
        if switch is not None and switch.value > 0:
            return []
        way_out = f'write "{name}.strength" = 1 in the same to, or switch it on before'
        return [Complaint(spot, "", f"{name} is switched off until here, so changing it has no effect", way_out)]

    def switched(self, switches: Switches, parts: Mapping[str, Part]) -> Switches:
        return switches.after(_strengths(self.to))


@dataclass(frozen=True, kw_only=True)
class Pulse(Stage):
    """Other values during the stage, then back; naming a part switches it on."""

    kind: ClassVar[str] = "pulse"

    duration: float = entry("time", "how long", above=0.0, way_out=_LONGER)
    to: Mapping[str, Change] = entry(
        "changes", "values during the pulse by path, such as \"lens.strength\" = 1; or { value, delay, duration }",
        of=Change,
    )

    def settled(self, place: str, parts: Mapping[str, Part], switches: Switches) -> tuple[Pulse, list[Complaint]]:
        stage, complaints = super().settled(place, parts, switches)
        to = {}
        for target, change in self.to.items():
            spot = f"{place}.to.{target}"
            for key in ("shape", "time_constant"):
                if getattr(change, key) is not None:
                    rule = "a pulse is switched on and off at once"
                    complaints.append(Complaint(f"{spot}.{key}", "", rule, f"leave {key} out, or use a ramp"))
            change, wrong = _timed(change, spot, self.duration)
            complaints += wrong + _centre_taken(target, spot, parts)
            to[target] = dataclasses.replace(change, shape=SUDDEN)
        for name in sorted({target.partition(".")[0] for target in to}):
            if switches.now.get(name, 1.0) == 0.0:
                to.setdefault(f"{name}.strength", _flash(name, to))
        return dataclasses.replace(stage, to=to), complaints + _unfit(to, place, parts)

    def switched(self, switches: Switches, parts: Mapping[str, Part]) -> Switches:
        return Switches(switches.now, switches.after(_strengths(self.to)).ever)


@dataclass(frozen=True, kw_only=True)
class Kick(Stage):
    """A velocity given to the whole cloud at once."""

    kind: ClassVar[str] = "kick"
    duration: ClassVar[float] = 0.0

    velocity: Triple | None = entry("velocity", "velocity added along x, y, z", count=3, default=None)
    recoils: float | None = entry(
        "number", "in place of the velocity: that many photon recoils of a lattice, along its axis", default=None,
        example="2",
    )
    of: str | None = entry("text", "the lattice whose recoils are meant", default=None)

    def settled(self, place: str, parts: Mapping[str, Part], switches: Switches) -> tuple[Kick, list[Complaint]]:
        stage, complaints = super().settled(place, parts, switches)
        if (self.velocity is None) == (self.recoils is None):
            complaints.append(Complaint(
                f"{place}.velocity", "neither" if self.velocity is None else "recoils as well",
                "a kick is given as a velocity or in recoils",
                'write velocity = ["0 mm/s", "0 mm/s", "3 mm/s"], or recoils = 2, of = "light"',
            ))
            return stage, complaints
        if self.recoils is None:
            if self.of is not None:
                complaints.append(Complaint(f"{place}.of", f'"{self.of}"', "this goes with recoils", "leave it out"))
            return stage, complaints
        lattices = {name: part for name, part in parts.items() if isinstance(part, Lattice)}
        if self.of in switches.now and (self.of not in parts or parts[self.of].complaints("")):
            return stage, complaints  # a part that is not in order has complaints of its own
        if self.of not in lattices:
            way_out = f"lattices of this plan: {', '.join(lattices)}" if lattices else "this plan has none: give a velocity"
            complaints.append(Complaint(f"{place}.of", f'"{self.of}"' if self.of else "",
                                        "recoils are those of a lattice, by its name", way_out))
            return stage, complaints
        lattice = lattices[self.of]
        velocity = [0.0, 0.0, 0.0]
        velocity[lattice.direction] = self.recoils * lattice.recoil_velocity
        return dataclasses.replace(stage, velocity=tuple(velocity)), complaints


@dataclass(frozen=True, kw_only=True)
class Release(Stage):
    """The trap is switched off, then the cloud flies."""

    kind: ClassVar[str] = "release"

    duration: float = entry("time", "from the start of the switch-off to the end of the flight", above=0.0,
                            way_out=_LONGER)
    switch_off: SwitchOff | None = entry(
        "table", "how the potential dies away; by default at once", default=None, of=SwitchOff
    )
    off: tuple[str, ...] | None = entry(
        "text", "names of the parts that are switched off; by default every part that confines", default=None,
        count=None,
    )

    def settled(self, place: str, parts: Mapping[str, Part], switches: Switches) -> tuple[Release, list[Complaint]]:
        stage, complaints = super().settled(place, parts, switches)
        names = self.off if self.off is not None else [name for name, part in parts.items() if part.confines]
        if self.off == ():
            complaints.append(Complaint(f"{place}.off", "[]", "a release switches something off",
                                        'name a part, leave "off" out, or use a hold'))
        for i, name in enumerate(self.off or ()):
            if name not in switches.now:
                rule = "gravity is never switched off" if name == "gravity" else "this is not a part of the trap"
                known = ", ".join(switches.now) or "none"
                complaints.append(Complaint(f"{place}.off[{i}]", f'"{name}"', rule, f"parts of this plan: {known}"))
        switch_off = self.switch_off
        if switch_off is not None:
            switch_off, wrong = _dying(switch_off, f"{place}.switch_off", self.duration)
            complaints += wrong
        return dataclasses.replace(stage, off=tuple(sorted(set(names))), switch_off=switch_off), complaints

    def switched(self, switches: Switches, parts: Mapping[str, Part]) -> Switches:
        return switches.after(dict.fromkeys(self.off or (), 0.0))


def _flash(name: str, to: Mapping[str, Change]) -> Change:
    """Full strength for as long as anything else of the part is changed."""
    own = [change for target, change in to.items() if target.startswith(f"{name}.")]
    delay = min(change.delay for change in own)
    # a duration that could not be settled has its own complaint
    end = max(change.delay + (change.duration or 0.0) for change in own)
    return Change(value=1.0, delay=delay, duration=end - delay if len(own) > 1 else own[0].duration, shape=SUDDEN)


def _strengths(to: Mapping[str, Change]) -> dict[str, float]:
    """The new strengths among some changes, by part."""
    return {t.partition(".")[0]: change.value for t, change in to.items() if t.endswith(".strength")}


def _unfit(to: Mapping[str, Change], place: str, parts: Mapping[str, Part]) -> list[Complaint]:
    """What does not fit together in parts after their changes, and did before."""
    complaints = []
    for name, part in parts.items():
        values = {t.partition(".")[2]: change.value for t, change in to.items() if t.partition(".")[0] == name}
        changed = dataclasses.replace(part, **values)
        # the same complaint stands at the part itself when it was there before
        before = {c.rule for c in part.complaints("")}
        complaints += [c for c in changed.complaints(f"{place}.to.{name}") if c.rule not in before]
    return complaints


def _timed(change: Change, spot: str, total: float) -> tuple[Change, list[Complaint]]:
    """A change that ends with its stage unless it says otherwise."""
    left = total - change.delay
    if left <= total * _ROUNDING:
        rule = f"the stage ends at {human(total, 'time')}"
        return change, [Complaint(f"{spot}.delay", human(change.delay, "time"), rule, "begin earlier")]
    if change.duration is None or abs(change.duration - left) <= total * _ROUNDING:
        return dataclasses.replace(change, duration=left), []
    if change.duration > left:
        got = f"{human(change.delay, 'time')} + {human(change.duration, 'time')}"
        rule = f"delay and duration fit into the stage, which takes {human(total, 'time')}"
        return change, [Complaint(f"{spot}.duration", got, rule, "make it shorter, or the stage longer")]
    return change, []


def _exponential(spot: str, shaped: Any, *, unused: bool) -> list[Complaint]:
    """An exponential needs a time constant, and nothing else has one."""
    if shaped.shape == "exponential" and shaped.time_constant is None:
        return [Complaint(f"{spot}.time_constant", "", "an exponential shape needs its time constant",
                          'write time_constant = "1 ms"')]
    if unused:
        rule, way_out = "only an exponential shape has a time constant", 'write shape = "exponential", or leave it out'
        return [Complaint(f"{spot}.time_constant", human(shaped.time_constant, "time"), rule, way_out)]
    return []


def _dying(switch_off: SwitchOff, spot: str, total: float) -> tuple[SwitchOff, list[Complaint]]:
    """A switch-off that knows how long it takes."""
    exponential = switch_off.shape == "exponential"
    unused = switch_off.time_constant is not None and not exponential
    complaints = _exponential(spot, switch_off, unused=unused)
    duration = switch_off.duration
    if duration is None and exponential and switch_off.time_constant is not None:
        duration = min(total, _DEAD * switch_off.time_constant)
    elif duration is None and not exponential:
        complaints.append(Complaint(f"{spot}.duration", "", f"a {switch_off.shape} switch-off needs its duration",
                                    'write duration = "100 us"'))
    elif duration is not None and duration > total * (1 + _ROUNDING):
        rule, way_out = f"the stage ends at {human(total, 'time')}", "make it shorter, or the stage longer"
        complaints.append(Complaint(f"{spot}.duration", human(duration, "time"), rule, way_out))
    return dataclasses.replace(switch_off, duration=duration and min(duration, total)), complaints


def _centre_taken(target: str, spot: str, parts: Mapping[str, Part]) -> list[Complaint]:
    """The centre of a part that follows the cloud is not free."""
    name, _, key = target.partition(".")
    if key != "centre" or getattr(parts.get(name), "at", "centre") != "cloud":
        return []
    rule = f'{name} has at = "cloud": it is centred on the cloud when it is switched on'
    return [Complaint(spot, "", rule, f"leave the change out, or leave at out of {name}")]
