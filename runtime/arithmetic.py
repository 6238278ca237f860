# SPDX-License-Identifier: 0BSD
"""Arithmetic of IEEE 754 for emitted Python modules: infinity and NaN where Python would raise, as in C."""

import math


def _div(a, b):
    if b != 0.0:
        return a/b
    if a == 0.0 or a != a or b != b:
        return math.nan
    return math.copysign(math.inf, a)*math.copysign(1.0, b)


def _pow(a, b):
    try:
        return math.pow(a, b)
    except OverflowError:
        return -math.inf if a < 0.0 and b % 2.0 == 1.0 else math.inf
    except ValueError:
        if a != 0.0:
            return math.nan
        return math.copysign(math.inf, a) if b % 2.0 == 1.0 else math.inf


def _ordered(a, b):
    return a == a and b == b


def _sqrt(a):
    return math.nan if a < 0.0 else math.sqrt(a)


def _exp(a):
    try:
        return math.exp(a)
    except OverflowError:
        return math.inf


def _expm1(a):
    try:
        return math.expm1(a)
    except OverflowError:
        return math.inf


def _log(a):
    return math.log(a) if a > 0.0 else -math.inf if a == 0.0 else math.nan


def _log10(a):
    return math.log10(a) if a > 0.0 else -math.inf if a == 0.0 else math.nan


def _log2(a):
    return math.log2(a) if a > 0.0 else -math.inf if a == 0.0 else math.nan


def _log1p(a):
    return math.log1p(a) if a > -1.0 else -math.inf if a == -1.0 else math.nan


def _sin(a):
    return math.sin(a) if math.isfinite(a) else math.nan


def _cos(a):
    return math.cos(a) if math.isfinite(a) else math.nan


def _tan(a):
    return math.tan(a) if math.isfinite(a) else math.nan


def _asin(a):
    return math.asin(a) if -1.0 <= a <= 1.0 else math.nan


def _acos(a):
    return math.acos(a) if -1.0 <= a <= 1.0 else math.nan


def _sinh(a):
    try:
        return math.sinh(a)
    except OverflowError:
        return math.copysign(math.inf, a)


def _cosh(a):
    try:
        return math.cosh(a)
    except OverflowError:
        return math.inf


def _acosh(a):
    return math.acosh(a) if a >= 1.0 else math.nan


def _atanh(a):
    if -1.0 < a < 1.0:
        return math.atanh(a)
    return math.copysign(math.inf, a) if a == 1.0 or a == -1.0 else math.nan


def _sign(a):
    return 1.0 if a > 0.0 else -1.0 if a < 0.0 else a


def _min(a, b):
    return a if a <= b else b if b < a else math.nan


def _max(a, b):
    return a if a >= b else b if b > a else math.nan
