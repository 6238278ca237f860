"""The benchmark as a picture: cost against accuracy of the derivative, and tape size against iterations."""

import math

_MARKS = {"limit": "_", "module": "*", "through": "o", "differences": "^", "hand": "s"}
_EXACT = 1e-17                   # an error of zero is drawn here


def available():
    """Whether matplotlib is installed."""
    import importlib.util

    return importlib.util.find_spec("matplotlib") is not None


def plot(facts, path):
    """Write the picture to a file; its suffix says the format. Needs matplotlib. Raises OSError, ValueError."""
    import matplotlib

    matplotlib.use("Agg")
    from matplotlib import pyplot

    figure, (cost, tape) = pyplot.subplots(1, 2, figsize=(13.0, 5.5), constrained_layout=True)
    _cost(cost, facts)
    _tape(tape, facts)
    figure.suptitle(f"{facts['name']}: cost of a root with its derivatives")
    try:
        figure.savefig(path)
    finally:
        pyplot.close(figure)


def _cost(axes, facts):
    for row in facts["rows"]:
        if row["absent"] or row["derivative_error"] is None or not math.isfinite(row["derivative_error"]["median"]):
            continue
        x, y = row["to_module"]["value"], max(row["derivative_error"]["median"], _EXACT)
        worst = max(row["derivative_error"]["worst"], _EXACT)
        axes.plot([x, x], [y, worst], color="0.8", linewidth=1.0, zorder=1)
        axes.plot(x, y, _MARKS[row["group"]], markersize=8, zorder=2)
        axes.annotate(row["title"], (x, y), textcoords="offset points", xytext=(5, 3), fontsize=6, rotation=20)
    axes.set(xscale="log", yscale="log", xlabel="time, in units of the module's solve with jacobian",
             ylabel="derivative error: median (mark) to worst (line)")
    axes.grid(True, which="major", color="0.93")


def _tape(axes, facts):
    evaluations, operations = facts["tape"]["evaluations"], facts["tape"]["operations"]
    axes.set(xlabel="evaluations of the residual", ylabel="operations on the tape")
    axes.grid(True, color="0.93")
    if not operations:
        axes.text(0.5, 0.5, "no C++ compiler: no tape", ha="center", transform=axes.transAxes)
        return
    axes.plot(evaluations, operations, "o", markersize=3, alpha=0.4, label="reverse tape through the module's loop")
    axes.axhline(0.0, color="C1", label="the module: nothing is recorded")
    axes.legend(fontsize=8)
