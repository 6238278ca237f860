"""Second derivatives of the results: the formulas of the first ones, differentiated along the root.

Let x_p = -g_p/g_x, and let d/dq be the total derivative with respect to the parameter q while the root follows. Then

    x_pq = -(dg_p/dq + x_p*dg_x/dq)/g_x
    f_pq = df_p/dq + x_p*df_x/dq + f_x*x_pq         for an output f

Total derivatives are carried forward through the instructions, with x_q where the unknown stands. Written out in
partial derivatives (g_pq + g_xp*x_q + g_xq*x_p + g_xx*x_p*x_q) the same sum loses the square of what this one loses
where the residual is stiff: the argument of its steep function hardly moves along the root, and here that small change
is formed once, before anything large is multiplied with it.
"""

from itertools import combinations_with_replacement

from rootwright.calculus.differentiate import partials
from rootwright.calculus.magnitude import smallest
from rootwright.calculus.program import needed
from rootwright.operations import OPERATIONS, Gated


def hessian(closing, g, slope, outputs, roots, magnitudes):
    """{"d2Y/dP/dQ": instruction} of all results and all pairs of parameters, symmetric, 0 where not differentiated.

    `closing` has `graph`, `model`, `unknown`, `parameters` and `label`; `outputs` maps names to instructions, `roots`
    are dx/dP, `magnitudes` tells which values can be 0 in the operating range.
    """
    graph, model, parameters = closing.graph, closing.model, list(closing.parameters.values())
    first = len(graph.instructions)
    names = list(closing.parameters)
    rows = {model.unknown.name: (slope, partials(graph, g, parameters))}
    for name, node in outputs.items():
        along, *direct = partials(graph, node, [closing.unknown, *parameters])
        rows[name] = along, direct
    zero = graph.number(0)
    entries = {f"d2{result}/d{p}/d{q}": zero for result in model.results for p in names for q in names}
    differentiated = [k for k, parameter in enumerate(model.parameters) if parameter.differentiate]
    # Of a pair, the formula of one is differentiated along the other. Along a parameter that can be 0 a derivative may
    # grow without limit there: differentiate its formula rather; otherwise the simpler one.
    order = [(smallest(magnitudes.of(parameters[k])) > 0.0,
              len(needed(graph.instructions, [direct[k] for _, direct in rows.values()]))) for k in range(len(names))]

    def label(node, name):
        if node >= first:                       # what only second derivatives use
            closing.label(node, name)

    following = [_AlongRoot(graph, name, {closing.unknown: roots[k], parameters[k]: graph.number(1)}, label, magnitudes)
                 for k, name in enumerate(names)]
    for a, b in combinations_with_replacement(differentiated, 2):
        p, q = sorted((a, b), key=order.__getitem__)
        root = None
        for result, (along, direct) in rows.items():
            change = graph.add(following[q].of(direct[p]), graph.mul(following[q].of(along), roots[p]))
            if root is None:
                entry = root = graph.neg(graph.div(change, slope))
            else:
                entry = graph.add(change, graph.mul(along, root))
            label(entry, f"{result}_{names[a]}_{names[b]}")
            entries[f"d2{result}/d{names[a]}/d{names[b]}"] = entries[f"d2{result}/d{names[b]}/d{names[a]}"] = entry
    return entries


class _AlongRoot:
    """Total derivatives with respect to one parameter, carried forward through the instructions."""

    def __init__(self, graph, name, seeds, label, magnitudes):
        self.graph, self.name, self.label, self.magnitudes = graph, name, label, magnitudes
        self.known = dict(seeds)

    def of(self, node):
        """Instruction of the total derivative of `node`."""
        for step in needed(self.graph.instructions, [node], self.known):
            self.known[step] = self._derivative(step)
            if step in self.graph.labels:
                self.label(self.known[step], f"d{self.graph.labels[step]}_d{self.name}")
        return self.known[node]

    def _derivative(self, node):
        graph, instruction = self.graph, self.graph.instructions[node]
        total = graph.number(0)
        if graph.is_constant(node) or instruction.op not in OPERATIONS or OPERATIONS[instruction.op].pullback is None:
            return total
        if instruction.op == "where" and graph.instructions[instruction.args[2]].op == "nan":
            return self._unless_nan(*instruction.args)
        if instruction.op == "div":
            return self._quotient(node, *instruction.args)
        if instruction.op == "pow" and self._steep_at_zero(*instruction.args):
            return self._steep_power(node, *instruction.args)
        gates = []
        for k, arg in enumerate(instruction.args):
            moved = self.known[arg]
            part = OPERATIONS[instruction.op].pullback(graph, moved, instruction.args, node)[k]
            if isinstance(part, Gated):
                gates.append(part)
            elif part is not None and graph.literal(moved) != 0:
                total = graph.add(total, part)
        return graph.where(gates[0].condition, gates[0].part, gates[1].part) if gates else total

    def _quotient(self, node, a, b):
        graph = self.graph
        return graph.div(graph.sub(self.known[a], graph.mul(self.known[b], node)), b)

    def _steep_at_zero(self, a, b):
        """A power below 1 of what can be 0: a**0.3, or what a**1.3 has become in a first derivative."""
        exponent = self.graph.rational(b)
        return exponent is not None and 0 < exponent < 1 and not smallest(self.magnitudes.of(a)) > 0.0

    def _steep_power(self, node, a, b):
        """Infinite at 0 where a moves, but 0 where it stays: then it stays 0 however the other parameters go."""
        graph, moved = self.graph, self.known[a]
        if graph.literal(moved) == 0:
            return moved
        part, _ = OPERATIONS["pow"].pullback(graph, moved, (a, b), node)
        return graph.where(graph.le(graph.abs_(moved), 0), 0, part)

    def _unless_nan(self, condition, a, nan):
        """A derivative stays NaN where it is; a value that is NaN for want of order needs no derivative."""
        ordered = self.graph.instructions[condition].op == "ordered"
        return self.known[a] if ordered else self.graph.where(condition, self.known[a], nan)
