"""The head lost along a pipe or a pump (negative: won), from the compiled closures, ready for derivatives."""

import math
from dataclasses import dataclass

from rootwright import pipeline

GRAVITY = 9.80665               # m/s^2
VISCOSITY = 1.20e-6             # m^2/s, kinematic, water at 13 C
LAMINAR, TURBULENT = 2000.0, 4000.0


class ClosureFailed(ArithmeticError):
    """A closure has no root here; the message says which closure, at which link."""


@dataclass(frozen=True, slots=True)
class Pipe:
    name: str
    start: str
    end: str
    length: float
    diameter: float
    roughness: int | float      # number of its unknown, or a known roughness (float)
    gate: int | None = None     # number of the unknown opening of a gate in it


@dataclass(frozen=True, slots=True)
class Pump:
    name: str
    start: str
    end: str
    H0: int | float             # number of its unknown, or a known head at no flow (float)
    c: float                    # the others as in the closure
    T0: float
    T1: float
    Tb: float
    sb: float
    N: float


@dataclass(slots=True)
class Closures:
    """The three compiled closures, all of one target."""
    friction: object            # pipe_friction: (Re, rel) -> y, f
    gate: object                # throttle_gate: (opening) -> jet, contraction, loss
    pump: object                # motor_pump: (Q, H0, c, T0, T1, Tb, sb, N) -> slip, head, power


SPECS = ("pipe_friction", "throttle_gate", "motor_pump")


def compile_closures(target, plan=None):
    """Closures compiled from the shipped specs, for "c" or "python", each with its own plan where none is given."""
    return Closures(*(pipeline.load(spec, target, chosen=plan) for spec in SPECS))


@dataclass(slots=True)
class Use:
    """One closure at one link: the link's loss changes by `weight` with the closure's result number `result`.

    The closure's parameter number `argument` changes by `chain` with the unknown (None: with none).
    """
    closure: str                # its name in Closures
    p: list
    root: object
    result: int
    weight: object
    argument: int
    unknown: int | None
    chain: float


@dataclass(slots=True)
class Fall:
    loss: object
    slope: object               # d loss/d flow
    uses: tuple


def evaluate(link, flow, unknowns, closures):
    """The Fall of a pipe or pump at a flow. Raises ClosureFailed."""
    return (_pipe if isinstance(link, Pipe) else _pump)(link, flow, unknowns, closures)


def _pipe(pipe, flow, unknowns, closures):
    """Darcy and Weisbach: loss = f*L/D*v^2/(2g), against the flow.

    f is the closure's from Re = 4000 up and 64/Re up to Re = 2000; between them, where no law holds, it goes smoothly
    from one to the other (common practice).
    """
    area = 0.25*math.pi*pipe.diameter**2
    scale = 1.0/(2.0*GRAVITY*area**2)
    size = abs(flow)
    reynolds = size*pipe.diameter/(area*VISCOSITY)
    unknown = pipe.roughness if isinstance(pipe.roughness, int) else None
    relative = (pipe.roughness if unknown is None else unknowns[unknown])/pipe.diameter
    p = [reynolds if reynolds >= TURBULENT else TURBULENT, relative]
    point, jac = _solve(closures.friction, p, pipe)
    friction = point.y[1]

    if reynolds >= TURBULENT:
        share = 1.0
        factor = friction*size                                       # f*|Q|, and its derivative with respect to |Q|
        rise = friction + reynolds*jac[1][0]
    else:
        laminar = 64.0*area*VISCOSITY/pipe.diameter
        w = (reynolds - LAMINAR)/(TURBULENT - LAMINAR)
        if w <= 0.0:
            w = 0.0
        share = w*w*(3.0 - 2.0*w)
        bend = 6.0*w*(1.0 - w)/(TURBULENT - LAMINAR)*pipe.diameter/(area*VISCOSITY)
        factor = laminar*(1.0 - share) + share*friction*size
        rise = bend*(friction*size - laminar) + share*friction
    rub = scale*pipe.length/pipe.diameter
    loss = rub*factor*flow
    slope = rub*(factor + size*rise)
    uses = [Use("friction", p, point.y[0], 1, rub*share*size*flow, 1, unknown, 1.0/pipe.diameter)]
    if pipe.gate is not None:
        p = [unknowns[pipe.gate]]
        point, _ = _solve(closures.gate, p, pipe)
        loss = loss + scale*point.y[2]*size*flow
        slope = slope + 2.0*scale*point.y[2]*size
        uses.append(Use("gate", p, point.y[0], 2, scale*size*flow, 0, pipe.gate, 1.0))
    return Fall(loss, slope, uses)


def _pump(pump, flow, unknowns, closures):
    unknown = pump.H0 if isinstance(pump.H0, int) else None
    p = [flow, pump.H0 if unknown is None else unknowns[unknown], pump.c, pump.T0, pump.T1, pump.Tb, pump.sb, pump.N]
    point, jac = _solve(closures.pump, p, pump)
    return Fall(-point.y[1], -jac[1][0], [Use("pump", p, point.y[0], 1, -1.0, 1, unknown, 1.0)])


def _solve(closure, p, link):
    point, jac = closure.solve_jacobian(p)
    if point.status < 0:
        shown = ", ".join(f"{float(value):.6g}" for value in p)
        raise ClosureFailed(f"no root at {link.name} for the parameters {shown}")
    return point, jac
