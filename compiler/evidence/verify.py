"""Hold a compiled module against a reference that shares nothing with it, and against its published values.

Roots: certified enclosures in ball arithmetic from the author's trees (`evidence/reference.py`). Derivatives, first
and second: high-precision differences of roots solved again. Tangent against adjoint: w.(J v) = (J' w).v. C against
Python. The limits are in `limits.py`.
"""

import math
import random
import statistics
from collections import Counter

from rootwright.calculus.balls import ball, precision
from rootwright.emit.assemble import assemble
from rootwright.binding.build import NoCompiler
from rootwright.binding.module import load
from rootwright.emit.manual import STATUS
from rootwright.evidence.evaluate import word
from rootwright.evidence.limits import LIMITS, ROOT_NOISE, ROOT_ULPS, SCALE_SHARE, SCALE_TINY, SCALE_WIDTH
from rootwright.evidence.noise import noise, sensitivity
from rootwright.evidence.points import choose, exact, in_range, published
from rootwright.evidence.reference import FINE, NotSettled, Reference
from rootwright.evidence.report import Finding, Measure, Report, Value, render, to_json
from rootwright.evidence.second_order import SecondOrder
from rootwright.plan.choose import choose as choose_plan

__all__ = ["hold", "modules", "render", "to_json", "verify"]

SHOWN = 3                       # findings of one kind that are kept
CAVEATS = {name: code for code, name, _ in STATUS if code > 0}


def verify(closure, points=200, seed=1, progress=None):
    """Report on the modules of a Closure at so many points of its operating range and at its published points.

    `progress` is called with a line of text now and then. Without a C compiler the Python module alone is held against
    the reference.
    """
    built, notes = modules(closure)
    return hold(closure, built, points, seed, progress, notes)


def modules(closure):
    """({target: module}, notes) of what can be built here."""
    built, notes, plan = {}, [], choose_plan(closure)
    try:
        built["c"] = load(closure, assemble(closure, "c", plan), "c")
    except NoCompiler as error:
        notes.append(f"the C module is left out: {error}")
    built["python"] = load(closure, assemble(closure, "python", plan), "python")
    return built, notes


def hold(closure, built, points=200, seed=1, progress=None, notes=()):
    """Report on modules {target: module}, built elsewhere; see `verify`.

    `points` may also be the points themselves, {parameter: double}.
    """
    holding = _Holding(closure, built, seed)
    corners, inside = choose(closure, points, seed) if isinstance(points, int) else ([], list(points))
    wanted = published(holding.reference.trees)
    every = [*corners, *inside, *wanted]
    for k, point in enumerate(every):
        if progress is not None:
            progress(f"{closure.model.name}: {k} of {len(every)} points")
        holding.try_point(point)
    values = holding.published(wanted)
    if progress is not None:
        progress("")
    return holding.report(len(corners), len(inside), values, tuple(notes))


class _Tally:
    """Values of one measure; keeps the worst and where it was."""

    def __init__(self, key):
        self.key, self.values, self.worst = key, [], (-1.0, "", "", {})

    def add(self, value, target, of, point):
        self.values.append(value)
        if not value <= self.worst[0]:
            self.worst = (value, target, of, point)

    def measure(self):
        goal = LIMITS[self.key].goal
        within = 1.0 if goal is None else sum(value <= goal for value in self.values) / len(self.values)
        value, target, of, point = self.worst
        return Measure(self.key, len(self.values), value, statistics.median(self.values), within, target, of, point)


class _Holding:
    def __init__(self, closure, built, seed):
        self.closure, self.model, self.built, self.seed = closure, closure.model, built, seed
        self.reference = Reference(closure.model)
        self.generator = random.Random(seed)
        self.tallies = {key: _Tally(key) for key in LIMITS}
        self.statuses = {target: Counter() for target in built}
        self.skipped, self.kinds, self.findings = Counter(), Counter(), []
        self.failures = 0
        self.ulps, self.overestimates = 0.0, []
        self.widths = {parameter.name: high - low
                       for parameter, (low, high) in zip(self.model.parameters, closure.ranges)}
        self.second = SecondOrder(self) if closure.order == 2 else None

    # -- collecting

    def measured(self, key, value, target, of, point, what):
        """Take a value of a measure; beyond its limit it is a finding."""
        self.tallies[key].add(value, target, of, point)
        if not value <= LIMITS[key].worst:
            self.found(key, target, f"{of}: {what}; {value:.3g}, the limit is {LIMITS[key].worst:g}", point)

    def found(self, key, target, what, point):
        self.failures += 1
        self.kinds[key] += 1
        if self.kinds[key] <= SHOWN:
            self.findings.append(Finding(key, target, what, point))

    # -- one point

    def try_point(self, point):
        solve = "solve_jacobian" if self.closure.order else "solve"
        solved = {target: getattr(module, solve)(list(point.values())) for target, module in self.built.items()}
        if not self.closure.order:
            solved = {target: (r, None) for target, r in solved.items()}
        for target, (r, _) in solved.items():
            self.statuses[target][word(r.status)] += 1
        roots = {target: r for target, (r, _) in solved.items() if r.status >= 0 and self._is_number(r, target, point)}
        self._same_status(solved, point)
        self._all_solved(solved, point)
        if not roots:
            return
        place = self.reference.place(point)
        near = next(iter(roots.values()))
        root = self._root(place, point, near, roots)
        if root is None:
            return
        spread, _ = noise(place, root.mid)
        size = float(root.mid)
        allowed = ROOT_ULPS * math.ulp(size) + ROOT_NOISE * spread
        for target, r in roots.items():
            self._root_error(root, r, allowed, target, point)
            self._outputs(place, r, target, point)
            if self.closure.order:
                self._identity(solved[target], target, point)
        if len(roots) == 2 and math.isfinite(allowed):
            c, python = roots["c"], roots["python"]
            self.measured("targets", abs(c.y[0] - python.y[0]) / allowed, "c", self.model.unknown.name, point,
                          f"C gives {c.y[0]!r}, Python {python.y[0]!r}")
        if self.closure.order:
            self._derivatives(root, {target: solved[target] for target in roots}, point)

    def _same_status(self, solved, point):
        words = {target: word(r.status) for target, (r, _) in solved.items()}
        if len(set(words.values())) > 1:
            self.found("targets", "c", "C says {c}, Python says {python}".format(**words), point)

    def _is_number(self, r, target, point):
        if math.isfinite(r.y[0]) and math.isfinite(r.error_bound):
            return True
        what = f"{word(r.status)}, but the root is {r.y[0]!r} with error_bound {r.error_bound!r}"
        self.found("root", target, what, point)
        return False

    def _all_solved(self, solved, point):
        for target, (r, _) in solved.items():
            if r.status < 0 and in_range(self.closure, point):
                try:
                    truth = f"a root is at {float(self.reference.root(point).mid)!r}"
                except NotSettled as error:
                    truth = f"the reference finds none either: {error}"
                self.found("solved", target, f"{word(r.status)} inside the operating range; {truth}", point)

    def _root(self, place, point, near, roots):
        """The certified root, or None where there is none: a finding, unless the residual is zero up to rounding."""
        try:
            return self.reference.root(point, near.y[0], max(r.error_bound for r in roots.values()))
        except NotSettled as error:
            residual = self.reference.trees.residual
            rounding, _ = sensitivity(place, ball(near.y[0]))
            if abs(float(place.value(residual, ball(near.y[0]), FINE).mid())) <= rounding:
                self.skipped["points where the residual only touches zero, within rounding: no exact root"] += 1
            else:
                for target, r in roots.items():
                    self.found("root", target, f"{r.y[0]!r} is no root that the reference can confirm: {error}", point)
            return None

    def _root_error(self, root, r, allowed, target, point):
        name, size = self.model.unknown.name, float(root.mid)
        error = root.distance(r.y[0])
        what = f"{r.y[0]!r}, exact {size!r}, error_bound {r.error_bound:.3g}"
        if math.isfinite(allowed):
            self.measured("root", error / allowed, target, name, point, what)
        else:
            self.skipped["roots without a slope, whose noise has no bound"] += 1
        ratio = error / r.error_bound if r.error_bound > 0.0 else 0.0 if error <= 0.0 else math.inf
        self.measured("bound", ratio, target, name, point, what)
        if size:
            self.ulps = max(self.ulps, error / math.ulp(size))
        self.overestimates.append(r.error_bound / max(error + math.ulp(size) / 2.0, math.ulp(0.0)))

    def _outputs(self, place, r, target, point):
        for index, (name, step) in enumerate(self.reference.trees.outputs.items(), 1):
            value = place.value(step, ball(r.y[0]), FINE)
            true = float(value.mid())
            rounding, _ = sensitivity(place, ball(r.y[0]), step) if value.is_finite() else (math.nan, 0.0)
            if not (math.isfinite(rounding) and math.isfinite(true)):
                self.skipped["outputs without a finite value or noise at the root"] += 1
                continue
            with precision(FINE):
                off = abs(value - ball(r.y[index])) if math.isfinite(r.y[index]) else None
                error = math.inf if off is None else max(float(off.mid() - off.rad()), 0.0)
            self.measured("output", error / (ROOT_ULPS * math.ulp(true) + ROOT_NOISE * rounding), target, name, point,
                          f"{r.y[index]!r}, exact {true!r}")

    def _identity(self, solved, target, point):
        """w.(J v) by tangent and (J' w).v by adjoint, for random v and w of the sizes of parameters and results."""
        r, jac = solved
        if not all(math.isfinite(entry) for row in jac for entry in row):
            return
        module, p = self.built[target], list(point.values())
        v, w = self.directions(point, r)
        along = sum(a * b for a, b in zip(w, module.tangent(p, r.y[0], v)))
        against = sum(a * b for a, b in zip(module.adjoint(p, r.y[0], w, [0.0] * len(p)), v))
        terms = sum(abs(a * entry * b) for a, row in zip(w, jac) for entry, b in zip(row, v))
        if 1e-280 < terms < math.inf:       # far from underflow
            self.measured("identity", abs(along - against) / terms, target, "w.(J v)", point,
                          f"tangent gives {along!r}, adjoint {against!r}")

    def directions(self, point, r):
        """A random direction of the sizes of the parameters, and random weights against the sizes of the results."""
        v = [self.generator.uniform(-1.0, 1.0) * (abs(value) or self.widths[name]) for name, value in point.items()]
        w = [self.generator.uniform(-1.0, 1.0) / (abs(value) if 1e-100 < abs(value) < 1e100 else 1.0) for value in r.y]
        return v, w

    # -- derivatives

    def _derivatives(self, root, solved, point):
        compared = {}
        for target, (r, jac) in solved.items():
            if r.status & CAVEATS["flat"]:
                self.skipped["points with a flat root, without derivatives"] += 1
                if not all(math.isnan(jac[i][k]) for i in range(len(jac)) for k in self._differentiated()):
                    self.found("derivative", target, "a flat root has derivatives that are numbers", point)
                if self.second:
                    self.second.flat(r, target, point)
            elif r.status & CAVEATS["kink"]:
                self.skipped["points with a root on a kink, derivatives not compared"] += 1
            else:
                compared[target] = r, jac
        if compared:
            true = self.reference.derivatives(point, root.mid)
            for target, (r, jac) in compared.items():
                self._compare(true, r, jac, target, point)
            if self.second:
                self.second.hold(root, compared, point)

    def _differentiated(self):
        return [k for k, parameter in enumerate(self.model.parameters) if parameter.differentiate]

    def _compare(self, true, r, jac, target, point):
        moved = None
        largest = dict.fromkeys(point, 0.0)
        for (_, parameter), derivative in true.items():
            largest[parameter] = max(largest[parameter], abs(derivative.value or 0.0))
        for i, result in enumerate(self.model.results):
            for k in self._differentiated():
                parameter = self.model.parameters[k].name
                of, given, derivative = f"d{result}/d{parameter}", jac[i][k], true[result, parameter]
                if derivative.value is None:
                    self._without(derivative.why, of, given, target, point)
                    continue
                scale = max(self._scale(derivative.value, r.y[i], parameter, point), SCALE_TINY * largest[parameter])
                error = abs(given - derivative.value) / scale
                what = f"{given!r}, exact {derivative.value!r}"
                if not error <= LIMITS["derivative"].worst:
                    moved = moved or self.reference.derivatives(point, ball(r.y[0]))
                    at_root = moved[result, parameter].value
                    if at_root is not None and abs(given - at_root) / scale <= LIMITS["derivative"].worst:
                        self.skipped["derivatives that the root's own error moves further than the limit"] += 1
                        error = abs(given - at_root) / scale
                self.measured("derivative", error, target, of, point, what)

    def _scale(self, derivative, result, parameter, point):
        reach = max(abs(point[parameter]), SCALE_WIDTH * self.widths[parameter], 5e-324)
        return max(abs(derivative), SCALE_SHARE * abs(result) / reach, 5e-324)

    def _without(self, why, of, given, target, point):
        """The reference finds no derivative."""
        if why == "kink" and math.isfinite(given):
            self.found("kink", target, f"{of} jumps there, but the status says no kink", point)
        elif why == "unbounded" and math.isfinite(given):
            self.found("derivative", target, f"{of}: {given!r}, but the derivative is unbounded", point)
        else:
            self.skipped["derivatives that the reference does not settle"] += 1

    # -- published values

    def published(self, points):
        return [value for entry, point in zip(self.model.published, points) for value in self._entry(entry, point)]

    def _entry(self, entry, point):
        trees, tolerances = self.reference.trees, dict(entry.tolerance)
        solved = {target: module.solve(list(point.values())) for target, module in self.built.items()}
        for result, expression in entry.expect:
            expected, tolerance = exact(trees, expression), exact(trees, tolerances[result])
            index = self.model.results.index(result)
            rows = []
            for target, r in solved.items():
                computed = r.y[index]
                with precision(256):
                    off = abs(ball(computed) - expected) if math.isfinite(computed) else None
                    passed = off is not None and not off > tolerance
                rows.append(Value(result, float(expected.mid()), float(tolerance.mid()), computed,
                                  math.inf if off is None else float(off.mid()), passed, entry.source, point))
                if not passed:
                    self.found("published", target, f"{result} is {computed!r} ({word(r.status)}), expected "
                               f"{float(expected.mid())!r} within {float(tolerance.mid()):g}", point)
            yield max(rows, key=lambda value: value.difference)

    def report(self, corners, inside, values, notes):
        measures = tuple(tally.measure() for tally in self.tallies.values() if tally.values)
        overestimate = statistics.median(self.overestimates) if self.overestimates else math.nan
        statuses = {target: dict(words) for target, words in self.statuses.items()}
        return Report(self.model.name, tuple(self.built), notes, corners, inside, self.seed, statuses, measures,
                      self.ulps, overestimate, dict(self.skipped), tuple(values), tuple(self.findings), self.failures)
