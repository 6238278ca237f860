"""Points of the box of ranges, the same ones on every run."""

import random


def sample(closure, count):
    """Points {parameter: double} of the box of ranges: corners first, then a fixed pseudo-random sequence, in `spread` coordinates."""
    parameters = closure.model.parameters
    corners = min(2 ** len(parameters), count // 4)
    generator = random.Random(1)
    for k in range(count):
        point = {}
        for bit, (parameter, (low, high)) in enumerate(zip(parameters, closure.ranges)):
            share = float(k >> bit & 1) if k < corners else generator.random()
            point[parameter.name] = between(low, high, share, parameter.spread)
        yield point


def between(low, high, share, spread):
    """The double at a share (0 to 1) of a range, in the coordinate that its spread says."""
    if share in (0.0, 1.0):
        return high if share else low
    value = low * (high / low) ** share if spread == "log" else low + (high - low) * share
    return min(max(value, low), high)
