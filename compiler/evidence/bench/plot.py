"""The benchmark as a picture: cost against accuracy of the derivative, and tape size against iterations."""

import math

_MARKS = {"limit": ("D", "0.4"), "module": ("*", "C3"), "through": ("o", "C0"), "differences": ("^", "C1"),
          "hand": ("s", "C2")}
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

    figure, (cost, names, tape) = pyplot.subplots(1, 3, figsize=(15.0, 6.0), width_ratios=(5, 2.2, 3.5),
                                                  layout="constrained")
    _cost(cost, names, facts)
    _tape(tape, facts)
    figure.suptitle(f"{facts['name']}: cost of a root with its derivatives")
    try:
        figure.savefig(path)
    finally:
        pyplot.close(figure)


def _cost(axes, names, facts):
    """A mark for each method, numbered from left to right; the names beside."""
    rows = [row for row in facts["rows"] if not row["absent"] and row["derivative_error"] is not None
            and math.isfinite(row["derivative_error"]["median"])]
    rows.sort(key=lambda row: row["to_module"]["value"])
    for k, row in enumerate(rows):
        mark, color = _MARKS[row["group"]]
        x, error = row["to_module"]["value"], row["derivative_error"]
        y, worst = max(error["median"], _EXACT), max(error["worst"], _EXACT)
        axes.plot([x, x], [y, worst], color=color, linewidth=1.0, alpha=0.5)
        axes.plot(x, y, mark, color=color, markersize=8)
        axes.annotate(str(k + 1), (x, y), textcoords="offset points", xytext=(0, -14 - 9*(k % 4)), ha="center",
                      fontsize=7)
        names.text(0.0, 1.0 - 0.04*k, f"{k + 1}", color=color, fontsize=8, transform=names.transAxes, va="top")
        names.text(0.1, 1.0 - 0.04*k, row["title"], color=color, fontsize=8, transform=names.transAxes, va="top")
    names.axis("off")
    axes.set(xscale="log", yscale="log", xlabel="time, in units of the module's solve with jacobian",
             ylabel="relative error of the derivatives: median (mark) to worst (line)")
    axes.set_ylim(bottom=1e-18)
    axes.grid(True, which="major", color="0.93")


def _tape(axes, facts):
    evaluations, operations = facts["tape"]["evaluations"], facts["tape"]["operations"]
    axes.set(xlabel="evaluations of the residual", ylabel="operations on the tape")
    axes.grid(True, color="0.93")
    axes.xaxis.get_major_locator().set_params(integer=True)
    if not operations:
        axes.text(0.5, 0.5, "no C++ compiler: no tape", ha="center", transform=axes.transAxes)
        return
    axes.plot(evaluations, operations, "o", markersize=3, alpha=0.4, label="reverse tape through the module's loop")
    axes.axhline(0.0, color="C3", label="the module: nothing is recorded")
    axes.legend(fontsize=8)
