"""What `verify` found, as data, as a table for people and as a dictionary for JSON."""

import textwrap
from dataclasses import asdict, dataclass

from rootwright.evidence.limits import LIMITS, OVERESTIMATE
from rootwright.spec.diagnostics import harmless

WIDTH = 110


@dataclass(frozen=True)
class Measure:
    """One quantity over all points, a key of LIMITS: its worst value and where, its median, how often it was taken."""
    key: str
    count: int
    worst: float
    median: float
    within: float               # share of the values at or below the goal for the median (1.0 where there is none)
    target: str                 # of the worst value: "c" or "python"
    of: str                     # of the worst value: a result, or result/parameter
    point: dict[str, float]

    @property
    def passed(self):
        return self.worst <= LIMITS[self.key].worst


@dataclass(frozen=True)
class Finding:
    """Something wrong at one point. `key`: which promise, one of LIMITS or "solved", "kink", "published"."""
    key: str
    target: str
    what: str
    point: dict[str, float]


@dataclass(frozen=True)
class Value:
    """A published value and what the module gives. `computed` is NaN where nothing was found."""
    result: str
    expected: float
    tolerance: float
    computed: float
    difference: float
    passed: bool
    source: str
    given: dict[str, float]


@dataclass(frozen=True)
class Report:
    name: str
    targets: tuple[str, ...]
    notes: tuple[str, ...]                      # what could not be done, such as C without a compiler
    corners: int
    random: int
    seed: int
    statuses: dict[str, dict[str, int]]         # target -> status word -> points, the published ones included
    measures: tuple[Measure, ...]
    root_ulps: float                            # worst error of a root in units in its last place
    overestimate: float                         # median of error_bound / (true error + half an ulp)
    skipped: dict[str, int]                     # reason -> points or derivatives that were not compared
    published: tuple[Value, ...]
    findings: tuple[Finding, ...]               # the first few of each kind
    failures: int                               # all of them

    @property
    def tried(self):
        """Points that were solved, over all targets."""
        return sum(count for words in self.statuses.values() for count in words.values())

    @property
    def failed(self):
        """Something was found wrong, or nothing could be tried, which promises nothing."""
        return self.failures > 0 or self.tried == 0


def to_json(report):
    """The report as a dictionary of plain data; `limit`, `goal` and `statement` say what each measure is held to."""
    data = asdict(report) | {"failed": report.failed}
    data["measures"] = [asdict(m) | {"passed": m.passed, "limit": LIMITS[m.key].worst, "goal": LIMITS[m.key].goal,
                                     "statement": LIMITS[m.key].statement} for m in report.measures]
    return data


def render(report):
    """The report as text."""
    lines = [*_head(report), *_measures(report), *_published(report), *_findings(report), _verdict(report)]
    return "\n".join(lines) + "\n"


def _head(report):
    targets = " and ".join({"c": "C", "python": "Python"}[target] for target in report.targets)
    yield (f"{report.name}: {targets} against a certified reference at {report.corners} corners of the operating range"
           f" and {report.random} random points (seed {report.seed})")
    if report.corners + report.random == 0:
        yield "no point that meets every requirement was found: only published values were tried"
    yield from report.notes
    for target, words in report.statuses.items():
        yield f"  status {target:6}  " + ", ".join(f"{count} {word}" for word, count in words.items())
    yield ""


def _measures(report):
    yield f"  {'measured':42}{'worst':>10}{'limit':>9}{'median':>10}{'values':>8}  verdict"
    for measure in report.measures:
        limit = LIMITS[measure.key]
        verdict = "holds" if measure.passed else "FAILS"
        goal = "" if limit.goal is None else f"; {100 * measure.within:.4g} % within {limit.goal:g}"
        yield (f"  {limit.measure:42}{measure.worst:>10.2g}{limit.worst:>9.2g}{measure.median:>10.2g}"
               f"{measure.count:>8}  {verdict}{goal}")
    yield f"  worst error of a root: {report.root_ulps:.3g} ulp"
    yield (f"  error_bound over true error plus half an ulp: median {report.overestimate:.3g} "
           f"(goal: {OVERESTIMATE:g} at most)")
    for reason, count in report.skipped.items():
        yield f"  {count} {reason}"
    yield ""


def _published(report):
    if not report.published:
        yield "  no published values"
    else:
        yield f"  {'published value':24}{'expected':>20}{'computed':>22}{'difference':>12}{'tolerance':>11}  verdict"
    for value in report.published:
        verdict = "agrees" if value.passed else "DIFFERS"
        yield (f"  {value.result:24}{value.expected!r:>20}{value.computed!r:>22}{value.difference:>12.2g}"
               f"{value.tolerance:>11.2g}  {verdict}")
        at = ", ".join(f"{name} = {number!r}" for name, number in value.given.items())
        yield from textwrap.wrap(f"at {at}", WIDTH, initial_indent="      ", subsequent_indent="        ")
        yield from textwrap.wrap(harmless(value.source), WIDTH, initial_indent="      ", subsequent_indent="        ")
    yield ""


def _findings(report):
    for finding in report.findings:
        yield f"  {finding.key} ({finding.target}): {finding.what}"
        yield "    " + ",".join(finding.point)
        yield "    " + ",".join(repr(number) for number in finding.point.values())
    if report.findings:
        yield ""


def _verdict(report):
    if report.tried == 0:
        return "  FAILED: there was nothing to verify"
    if not report.failed:
        return "  everything holds"
    more = report.failures - len(report.findings)
    return f"  FAILED: {report.failures} findings" + (f", {more} of them not shown" if more else "")
