"""Derivatives as a handbook writes them: the chain rule through the author's definitions, every line a short formula.

They come from the same derivative rules as the emitted code.
"""

from rootwright.calculus.differentiate import partials
from rootwright.calculus.lower import Lowering
from rootwright.calculus.program import Graph, Node, needed
from rootwright.evidence.tidy import formula


def derivative_lines(model):
    """{result: [(name, formula), ...]} for the residual (under a name of its own, the first key) and every output.

    The lines of r hold `r_d = ...` for the definitions d between r and its inputs (the derivative of r through all that
    uses d), then for the unknown and the differentiated parameters; what is zero is left out. Formulas that are a mere
    number or name are put where they are used.
    """
    sheet = _Sheet(model)
    lines = {residual_name(model): sheet.lines(residual_name(model), sheet.residual)}
    for output in model.outputs:
        lines[output.name] = sheet.lines(output.name, sheet.outputs[output.name])
    return lines


def residual_name(model):
    """`g`, or another name where the author uses that (none of theirs has two underscores)."""
    taken = _declared(model)
    return next(name for name in ("g", "G", "residual", "g__") if name not in taken)


def _declared(model):
    groups = (model.constants, model.parameters, model.definitions, model.outputs)
    return {model.unknown.name, *(item.name for group in groups for item in group)}


class _Sheet:
    """The expressions of a Model in one Graph, where every definition and output is an input to what uses it."""

    def __init__(self, model):
        self.model = model
        self.graph = graph = Graph()
        self.declared = _declared(model)
        self.forms = {}
        lowering = Lowering(graph)
        for constant in model.constants:
            lowering.declare(constant.name, graph.named(constant.name, lowering.lower(constant.expression)))
        for name in (*(parameter.name for parameter in model.parameters), model.unknown.name):
            lowering.declare(name, graph.input(name))
        self.bodies = {}         # definitions and outputs in order: name -> its expression
        for definition in model.definitions:
            self._enter(lowering, definition)
        self.residual = lowering.lower(model.residual)
        for output in model.outputs:
            self._enter(lowering, output)
        self.outputs = {output.name: self.bodies[output.name] for output in model.outputs}

    def _enter(self, lowering, item):
        self.bodies[item.name] = lowering.lower(item.expression)
        lowering.declare(item.name, self.graph.input(item.name))

    def lines(self, result, body):
        graph, lines, flows = self.graph, [], {}
        self._flow(graph.number(1), body, flows)
        for name in reversed(self.bodies):
            if name in flows and name != result:
                through = flows.pop(name)
                if not self._is_short(through):
                    label = self._label(result, name)
                    lines.append((label, formula(graph, through, self.forms)))
                    through = graph.input(label)
                self._flow(through, self.bodies[name], flows, name)
        wanted = [self.model.unknown.name, *(p.name for p in self.model.parameters if p.differentiate)]
        return lines + [(self._label(result, name), formula(graph, flows[name], self.forms)) for name in wanted
                        if name in flows and graph.literal(flows[name]) != 0]

    def _flow(self, weight, body, flows, name=None):
        """Adds weight times the partial derivatives of a body to the derivatives with respect to what it mentions."""
        graph = self.graph
        inputs = [Node(node) for node in needed(graph.instructions, [body]) if graph.instructions[node].op == "input"]
        derivatives = partials(graph, body, inputs)
        if name is not None:
            derivatives = self._mention(derivatives, body, name)
        for node, partial in zip(inputs, derivatives):
            mentioned = graph.instructions[node].value
            flows[mentioned] = graph.add(flows.get(mentioned, graph.number(0)), graph.mul(weight, partial))

    def _mention(self, derivatives, body, name):
        """The derivatives with the body's own value, where it appears in them, written as its name."""
        graph = self.graph
        if graph.instructions[body].op in ("input", "number", "named"):
            return derivatives
        named = {body: graph.input(name)}
        for node in needed(graph.instructions, derivatives, [body]):
            instruction = graph.instructions[node]
            args = tuple(named.get(arg, arg) for arg in instruction.args)
            if args != instruction.args:
                named[node] = graph.enter(instruction.op, args, instruction.value)
        return [named.get(partial, partial) for partial in derivatives]

    def _is_short(self, node):
        instruction = self.graph.instructions[node]
        if instruction.op == "neg":
            instruction = self.graph.instructions[instruction.args[0]]
        return instruction.op in ("number", "input")

    def _label(self, result, name):
        """`g_x`; with two underscores, which no name of the author's has, where the author uses that."""
        return f"{result}_{name}" if f"{result}_{name}" not in self.declared else f"{result}__{name}"
