"""What `verify` holds second derivatives to: second differences for reference, symmetry, the Hessian-vector product."""

import math
from itertools import combinations_with_replacement

from rootwright.calculus.balls import ball
from rootwright.evidence.limits import LIMITS, SCALE_SHARE, SCALE_WIDTH
from rootwright.evidence.second_differences import second_derivatives

MOVED = "second derivatives that the root's own error moves further than the limit"


class SecondOrder:
    """Holds hessian and tangent_adjoint of the modules of a `_Holding`, which takes what is measured and found."""

    def __init__(self, holding):
        self.holding, self.model, self.reference = holding, holding.model, holding.reference
        self.names = [parameter.name for parameter in self.model.parameters]
        self.differentiated = [k for k, parameter in enumerate(self.model.parameters) if parameter.differentiate]
        self.pairs = list(combinations_with_replacement(self.differentiated, 2))

    def flat(self, r, target, point):
        """A flat root has no second derivatives."""
        hess = self.holding.built[target].hessian(list(point.values()), r.y[0])
        if not all(math.isnan(matrix[i][j]) for matrix in hess for i, j in self.pairs):
            self.holding.found("second", target, "a flat root has second derivatives that are numbers", point)

    def hold(self, root, solved, point):
        """Second derivatives at one point; solved: {target: (r, jac)} of roots that are neither flat nor on a kink."""
        true = second_derivatives(self.reference, point, root.mid)
        for target, (r, jac) in solved.items():
            hess = self.holding.built[target].hessian(list(point.values()), r.y[0])
            self._shape(hess, target, point)
            self._compare(true, r, jac, hess, target, point)
            self._product(r, hess, target, point)

    def _shape(self, hess, target, point):
        """Symmetric to the bit, and 0 for parameters that are not differentiated."""
        count = range(len(self.names))
        for result, matrix in zip(self.model.results, hess):
            for i in count:
                for j in count:
                    entry, mirrored = matrix[i][j], matrix[j][i]
                    of = f"d2{result}/d{self.names[i]}/d{self.names[j]}"
                    if entry != mirrored and not (math.isnan(entry) and math.isnan(mirrored)):
                        self.holding.found("second", target, f"{of}: {entry!r}, but {mirrored!r} the other way", point)
                    if not {i, j} <= set(self.differentiated) and entry != 0.0:
                        self.holding.found("second", target, f"{of}: {entry!r}, but that is not differentiated", point)

    def _compare(self, true, r, jac, hess, target, point):
        limit, moved = LIMITS["second"].worst, None
        for k, result in enumerate(self.model.results):
            for i, j in self.pairs:
                key = result, self.names[i], self.names[j]
                of, given, derivative = f"d2{result}/d{key[1]}/d{key[2]}", hess[k][i][j], true[key]
                if derivative.value is None:
                    self._without(derivative.why, of, given, target, point)
                    continue
                if math.isinf(derivative.value):
                    self.holding.skipped["second derivatives beyond the largest double"] += 1
                    continue
                scale = self._scale(derivative.value, r.y[k], jac[k], (i, j), point)
                error = abs(given - derivative.value) / scale
                if not error <= limit:
                    moved = moved or second_derivatives(self.reference, point, ball(r.y[0]))
                    at_root = moved[key].value
                    if at_root is not None and abs(given - at_root) / scale <= limit:
                        self.holding.skipped[MOVED] += 1
                        error = abs(given - at_root) / scale
                what = f"{given!r}, exact {derivative.value!r}"
                self.holding.measured("second", error, target, of, point, what)

    def _scale(self, derivative, result, first, pair, point):
        """Size of a second derivative, or a share of the result and its first derivatives over the parameters."""
        i, j = pair
        one, other = self._reach(i, point), self._reach(j, point)
        natural = max(abs(result) / one / other, abs(first[i]) / other, abs(first[j]) / one)
        return max(abs(derivative), SCALE_SHARE * natural, 5e-324)

    def _reach(self, k, point):
        """What a parameter changes by: its size, and a share of its range where that is measured by differences."""
        name = self.names[k]
        share = 0.0 if self.model.parameters[k].spread == "log" else SCALE_WIDTH * self.holding.widths[name]
        return max(abs(point[name]), share, 5e-324)

    def _without(self, why, of, given, target, point):
        """The reference finds no second derivative."""
        if why in ("kink", "unbounded") and math.isfinite(given):
            what = "jumps there, but the status says no kink" if why == "kink" else f"{given!r}, but it is unbounded"
            self.holding.found("second", target, f"{of}: {what}", point)
        else:
            self.holding.skipped["second derivatives that the reference does not settle"] += 1

    def _product(self, r, hess, target, point):
        """tangent_adjoint against the sum over the hessian, for a random direction and weights."""
        if not all(math.isfinite(entry) for matrix in hess for row in matrix for entry in row):
            return
        holding, p = self.holding, list(point.values())
        v, w = holding.directions(point, r)
        added = holding.built[target].tangent_adjoint(p, r.y[0], v, w, [0.0] * len(p))
        for i, name in enumerate(self.names):
            terms = [weight * entry * along for weight, matrix in zip(w, hess) for entry, along in zip(matrix[i], v)]
            size = sum(map(abs, terms))
            if 1e-280 < size < math.inf:        # far from underflow
                what = f"tangent_adjoint gives {added[i]!r}, the hessian {sum(terms)!r}"
                holding.measured("product", abs(added[i] - sum(terms)) / size, target, f"w.H v, {name}", point, what)
