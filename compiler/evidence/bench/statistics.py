"""Ratios of times with an interval that covers what differs from process to process."""

import math
import statistics

# Student's t, two-sided 95 %, by degrees of freedom (any table; Student 1908 for the method).
_T = {1: 12.706, 2: 4.303, 3: 3.182, 4: 2.776, 5: 2.571, 6: 2.447, 7: 2.365, 8: 2.306, 9: 2.262, 10: 2.228}


def ratio(above, below):
    """(ratio, lower, upper): geometric mean of the ratios of times, one pair a process, and its 95 % interval."""
    logs = [math.log(a/b) for a, b in zip(above, below)]
    middle = statistics.fmean(logs)
    if len(logs) < 2:
        return math.exp(middle), 0.0, math.inf
    reach = _T.get(len(logs) - 1, 2.0)*statistics.stdev(logs)/math.sqrt(len(logs))
    return math.exp(middle), math.exp(middle - reach), math.exp(middle + reach)


def spread(times):
    """Half the range of the processes' medians, as a share of their median."""
    return 0.5*(max(times) - min(times))/statistics.median(times)
