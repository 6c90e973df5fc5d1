"""Does the density change just as the current says? The march's own steps are asked."""

from __future__ import annotations

from dataclasses import replace

from trapsim.cloud.cloud import Cloud
from trapsim.evolve.march import stepper
from trapsim.evolve.scaling import LawStart
from trapsim.evolve.state import Leg
from trapsim.measure.flow import continuity_residual

#: of the last step, the share by which the cloud is moved back and forth
SHARE = 0.02


def continuity(cloud: Cloud, law: LawStart, leg: Leg, h: float) -> float:
    """The continuity residual at a state of the march, by two short steps back in time.

    Parameters
    ----------
    cloud : Cloud
        Left as it is.
    law : LawStart
        The frame law it is under.
    leg : Leg
    h : float
        The length of a step of the march, s.

    Returns
    -------
    float
        ||d n/dt + div j|| over ||n|| times the fastest rate of the flow.
    """
    step = stepper(law, replace(leg, space=cloud.space), cloud.q)
    short = min(SHARE * h, (cloud.time - law.time) / 2)
    states = [cloud]
    for _ in range(2):
        last = states[-1]
        phi = step.strang(last.space.array(last.phi), last.time, -short)
        states.append(replace(last, phi=phi, time=last.time - short, frame=step.law.frame(last.time - short)))
    return continuity_residual(states[2], states[1], states[0])
