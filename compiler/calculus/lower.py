"""Expression trees to instructions: the author's operations in the author's order."""

from fractions import Fraction

from rootwright.spec.expression import Name, Number

COMPARISONS = ("lt", "le", "gt", "ge")


def comparisons(graph, condition):
    """What a condition compares: (left, right) of each comparison in it, from left to right."""
    pairs, pending = [], [condition]
    while pending:
        instruction = graph.instructions[pending.pop()]
        if instruction.op in COMPARISONS:
            pairs.append(instruction.args)
        else:
            pending.extend(reversed(instruction.args))
    return pairs


class Lowering:
    """Lowers the expressions of one Model into one Graph. Names resolve to inputs, constants and definitions."""

    def __init__(self, graph):
        self.graph = graph
        self.names = {"pi": graph.pi()}

    def declare(self, name, node):
        self.names[name] = node

    def lower(self, expression, places=None):
        """Node of an Expression (a number, or a condition where the tree is one); `places` collects {node: span in the text}.

        Walks with a stack of its own: a sum of thousands of terms is a tree thousands of levels deep.
        """
        places = {} if places is None else places
        stack, values = [(expression.tree, False)], []
        while stack:
            tree, ready = stack.pop()
            if isinstance(tree, Number):
                values.append(self.graph.number(Fraction(tree.text)))
                places.setdefault(values[-1], (tree.start, tree.end))
            elif isinstance(tree, Name):
                values.append(self.names[tree.name])
            elif not ready:
                stack.append((tree, True))
                stack.extend((arg, False) for arg in reversed(tree.args))
            else:
                count = len(tree.args)
                args = values[-count:]
                del values[-count:]
                values.append(self._operation(tree.op, args))
                places.setdefault(values[-1], (tree.start, tree.end))
        return values[0]

    def _operation(self, op, args):
        graph = self.graph
        if op == "pow":
            return graph.power(*args)
        if op in ("min", "max"):
            result = args[0]
            for arg in args[1:]:
                result = graph.apply(op, result, arg)
            return result
        if op == "where":
            return self._where(*args)
        return graph.apply(op, *args)

    def _where(self, condition, a, b):
        """A choice; where an operand of a comparison could be NaN, a NaN there makes the result NaN."""
        graph = self.graph
        chosen = graph.enter("where", (condition, a, b))
        for left, right in comparisons(graph, condition):
            if not (self.is_finite(left) and self.is_finite(right)):
                chosen = graph.enter("where", (graph.apply("ordered", left, right), chosen, graph.nan()))
        return chosen

    def is_finite(self, node):
        """Inputs are checked to be finite before anything is evaluated, constants at compile time."""
        return self.graph.is_constant(node) or self.graph.instructions[node].op == "input"
