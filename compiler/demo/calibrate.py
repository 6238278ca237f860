"""From readings to unknowns: the misfit, the search for its smallest value, and how sure the answer is."""

import math
from dataclasses import dataclass, field

import numpy as np

from rootwright.demo.network import NotSolved, solve

ENOUGH = 1.0e-8         # a step that promises less ends the search: 1e-4 standard errors from the least misfit


@dataclass(frozen=True)
class Survey:
    """What was read, where and when. readings[case][sensor] in SI units."""
    network: object
    cases: tuple
    unknowns: tuple
    readings: list

    def values(self, z):
        """Unknowns at the coordinates z of the search, the handbook's at z = 0: value = handbook*factor^z."""
        return [unknown.handbook*unknown.factor**k for unknown, k in zip(self.unknowns, z)]

    def chain(self, z):
        """d value/d z."""
        return [value*math.log(unknown.factor) for unknown, value in zip(self.unknowns, self.values(z))]

    def solve(self, z, closures, starts=None):
        """States of all cases. Raises NotSolved."""
        values = self.values(z)
        return [solve(self.network, case, values, closures, start)
                for case, start in zip(self.cases, starts or [None]*len(self.cases))]

    def misfit(self, states):
        """Half the sum of squares of the readings' deviations, each in its standard deviations."""
        return sum(0.5*d*d for state, read in zip(states, self.readings) for d in self.deviations(state, read))

    def deviations(self, state, read):
        return [(value - seen)*(1.0/sensor.error) for value, seen, sensor in
                zip(self.network.readings(state), read, self.network.sensors)]


def measure(network, cases, unknowns, closures, seed):
    """A Survey with invented readings: the state for the planted values and a normal error on each reading."""
    random = np.random.default_rng(seed)
    planted = [unknown.planted for unknown in unknowns]
    errors = np.array([sensor.error for sensor in network.sensors])
    readings = []
    for case in cases:
        exact = np.array(network.readings(solve(network, case, planted, closures)))
        readings.append([float(value) for value in exact + errors*random.standard_normal(len(errors))])
    return Survey(network, cases, unknowns, readings)


@dataclass
class Found:
    z: list
    misfit: float
    states: list
    steps: int = 0
    trials: int = 0                 # misfits computed
    history: list = field(default_factory=list)     # misfit at each step


def search(survey, closures, gradient):
    """Smallest misfit, from the handbook's values on: quasi-Newton steps with the update of Broyden, Fletcher, Goldfarb
    and Shanno (1970), each halved until the misfit falls by a share of what the slope promises.

    gradient(z, states) gives the derivatives of the misfit by z. Raises NotSolved if the start cannot be solved.
    """
    count = len(survey.unknowns)
    z = np.zeros(count)
    states = survey.solve(z, closures)
    found = Found(z, survey.misfit(states), states, trials=1)
    found.history.append(found.misfit)
    slope = np.array(gradient(list(z), states))
    inverse = np.eye(count)/np.linalg.norm(slope)
    while found.steps < 200:
        step = -inverse @ slope
        step *= min(1.0, 1.0/np.abs(step).max())        # at most one factor of each unknown's handbook range
        promise = -slope @ step
        if promise < ENOUGH:
            break
        share = 1.0
        while True:
            found.trials += 1
            try:
                trial = survey.solve(z + share*step, closures, states)
                misfit = survey.misfit(trial)
                if misfit <= found.misfit - 1.0e-4*share*promise:
                    break
            except NotSolved:
                pass
            share *= 0.5
            if share < 1.0e-6:
                return found                              # the gradient is no longer good enough to go on
        z, states = z + share*step, trial
        found.z, found.misfit, found.states = z, misfit, states
        found.steps += 1
        found.history.append(misfit)
        latest = np.array(gradient(list(z), states))
        moved, turned = share*step, latest - slope
        slope = latest
        if moved @ turned > 0.0:
            if found.steps == 1:
                inverse = np.eye(count)*(moved @ turned)/(turned @ turned)
            rho = 1.0/(moved @ turned)
            left = np.eye(count) - rho*np.outer(moved, turned)
            inverse = left @ inverse @ left.T + rho*np.outer(moved, moved)
    return found
