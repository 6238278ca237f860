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
    _cost(figure, cost, names, facts)
    _tape(tape, facts)
    figure.suptitle(f"{facts['name']}: cost of a root with its derivatives")
    try:
        figure.savefig(path)
    finally:
        pyplot.close(figure)


def _cost(figure, axes, names, facts):
    """A mark for each method, numbered from left to right; the names beside."""
    rows = [row for row in facts["rows"] if not row["absent"] and row["derivative_error"] is not None
            and math.isfinite(row["derivative_error"]["median"])]
    rows.sort(key=lambda row: row["to_module"]["value"])
    marks = []
    for k, row in enumerate(rows):
        mark, color = _MARKS[row["group"]]
        x, error = row["to_module"]["value"], row["derivative_error"]
        y, worst = max(error["median"], _EXACT), max(error["worst"], _EXACT)
        axes.plot([x, x], [y, worst], color=color, linewidth=1.0, alpha=0.5)
        axes.plot(x, y, mark, color=color, markersize=10 if mark == "*" else 7, markeredgecolor="white", markeredgewidth=0.5,
                  zorder=4 if mark == "*" else 3)
        marks.append((x, y, color))
        for left, text in ((0.0, f"{k + 1}"), (0.1, row["title"])):
            names.text(left, 1.0 - 0.036*k, text, color=color, fontsize=8, transform=names.transAxes, va="top")
    names.axis("off")
    axes.set(xscale="log", yscale="log", xlabel="time, in units of the module's solve with jacobian",
             ylabel="relative error of the derivatives: median (mark) to worst (line)")
    axes.set_ylim(bottom=1e-20)
    axes.grid(True, which="major", color="0.93")
    figure.canvas.draw()                     # only then is it known where things lie
    _number(axes, marks)


def _number(axes, marks):
    """Numbers under the marks, each as near to its mark as those before it leave room."""
    placed = []
    for k, (x, y, color) in enumerate(marks, 1):
        across, up = (float(place) for place in axes.transData.transform((x, y)))
        down = 14.0
        while any(abs(across - other) < 14.0 and abs(up - down - height) < 11.0 for other, height in placed):
            down += 11.0
        placed.append((across, up - down))
        axes.annotate(f"{k}", (x, y), textcoords="offset pixels", xytext=(0.0, -down), ha="center", va="center", fontsize=7,
                      color=color)


def _tape(axes, facts):
    evaluations, operations = facts["tape"]["evaluations"], facts["tape"]["operations"]
    axes.set(xlabel="evaluations of the residual in the plain loop", ylabel="operations on the tape")
    axes.grid(True, color="0.93")
    axes.xaxis.get_major_locator().set_params(integer=True)
    if not operations:
        axes.text(0.5, 0.5, "no C++ compiler: no tape", ha="center", transform=axes.transAxes)
        return
    axes.plot(evaluations, operations, "o", markersize=3, alpha=0.4, label="reverse tape through the plain loop, a mark a root")
    axes.axhline(0.0, color="C3", label="the module: nothing is recorded")
    axes.legend(fontsize=8)
