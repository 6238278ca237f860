"""The story as a page of plain text."""

import math
import textwrap

WIDTH = 116
TARGETS = {"c": "C", "python": "Python"}

_MAP = r"""
   Weir Works               OLD TOWN       the Ink      HARBOUR
       |                 A1--B1--C1--------~~~~-------D1--E1
    2 pumps              |   |   |         ~~~~       |   |
       |                 A2--B2--C2        ~~~~       D2--E2===.
       W0======W1======. |   |   |                    |   |     \
                 \      `A3==B3==C3=====[ gate ]======D3--E3     L1=====tank on
                  \      |   |   |    Tanner's Bridge |   |     /       Lantern Hill
                   \     A4--B4--C4        ~~~~       D4--E4==='
                    \    |   |   |         ~~~~       |   |
                     `===A5--B5--C5--------~~~~-------D5--E5
                                  `--booster--U1..U7, Kite Terrace       (ten dead ends not drawn)"""


def page(told):
    """Lines of the whole page."""
    return [*opening(told), "", *(line.rstrip() for line in (*_ways(told), "", *_lessons(told)))]


def opening(told):
    """Lines up to the calibration."""
    return [*_place(told), "", *_closures(told), "", *_solved(told), "", *_found(told)]


def _place(told):
    network = told.survey.network
    pipes = network.pipes
    readings = len(network.sensors)*len(told.survey.cases)
    return [
        "THE GATE AT TANNER'S BRIDGE",
        *_wrapped(
            "Brindlemouth does not exist: the town, its pipes and every reading below are invented. Two pumps at the "
            "Weir Works lift water to the old town; a main over Tanner's Bridge, and two thin iron pipes beside it, "
            "carry it on to the harbour and the tank. Years ago somebody throttled the gate on the bridge and wrote "
            "nothing down. How far is it open? How rough are the pipes by now, how worn the pumps? Sixteen pressure "
            "loggers and four flow meters, read at four hours of one day, are to tell.", ""),
        *_MAP.splitlines()[1:],
        f"{len(pipes)} pipes, {sum(pipe.length for pipe in pipes)/1000:.1f} km; {len(network.junctions)} junctions, "
        f"{network.loops} loops, {len(network.links) - len(pipes)} pumps, {len(network.sources)} fixed levels; "
        f"{readings} readings (seed {told.seed}), {len(told.survey.unknowns)} unknowns.",
    ]


def _closures(told):
    language = "C" if told.target == "c" else "Python (no C compiler was found)"
    lines = [f"1. Three closures, compiled from their specs to {language} in {told.compile_seconds:.1f} s",
             f"   {'spec':14} {'solved for':10} {'equation':40} {'links':>5}  {'evaluations: mean, most':>23}"]
    for model, links, mean, most in told.closures:
        lines.append(f"   {model.name:14} {model.unknown.name:10} {model.equation:40} {links:5}  {mean:18.1f} {most:4}")
    return lines


def _solved(told):
    network, cases = told.survey.network, told.survey.cases
    place = {link.name: k for k, link in enumerate(network.links)}
    lines = ["2. The network, solved by Newton's method with the closures' tangents (L/s; minus: the tank fills)",
             f"   {'hour':36} {'steps':>5} {'works':>8} {'booster':>8} {'bridge':>8} {'tank':>8}  "
             f"{'lowest pressure':>17}"]
    for case, state in zip(cases, told.states):
        pressure, where = min((head - junction.elevation, junction.name)
                              for head, junction in zip(state.heads, network.junctions))
        flow = {name: 1e3*state.flows[k] for name, k in place.items()}
        flows = (flow["works pump 1"] + flow["works pump 2"], flow["booster"], flow["C3-D3"], flow["LH-L1"])
        shown = " ".join(f"{value:8.1f}" for value in flows)
        lines.append(f"   {case.name:36} {state.steps:5} {shown}  {pressure:7.1f} m at {where}")
    history = told.states[0].history
    return lines + [
        f"   How it converged at {cases[0].name.split(',')[0]}, step by step:",
        f"     worst link, m        {' '.join(f'{row[0]:7.0e}' for row in history)}",
        f"     worst junction, L/s  {' '.join(f'{1e3*row[1]:7.0e}' for row in history)}",
        *_wrapped(f"All four hours took {_ms(told.solve_seconds)}. {told.slow} of "
                  f"{len(told.states)*len(network.pipes)} pipe flows are too slow for the closure's range; there the "
                  "laminar law takes over."),
    ]


def _found(told):
    survey, found = told.survey, told.found
    free = len(survey.network.sensors)*len(survey.cases) - len(survey.unknowns)
    lines = ["3. The calibration, with the closures' adjoints",
             f"   {'unknown':38} {'':4} {'handbook':>9} {'found':>9} {'+-':>7} {'planted':>9}   off by"]
    for unknown, value, error, off in zip(survey.unknowns, survey.values(found.z), told.errors, told.departures):
        shown = unknown.shown
        lines.append(
            f"   {unknown.name:38} {unknown.unit:>4} {unknown.handbook*shown:9.3f} {value*shown:9.3f} "
            f"{error*shown:7.3f} {unknown.planted*shown:9.3f}   {off:+.1f} standard errors")
    return lines + _wrapped(
        f"In {found.steps} steps and {told.search_seconds:.1f} s half the sum of squares fell from "
        f"{found.history[0]:.0f} to {found.misfit:.1f}; errors of reading alone leave {free/2:.0f} +- "
        f"{math.sqrt(free/2):.0f}.")


def _ways(told):
    lines = ["4. The same derivatives in other ways",
             f"   {'':43} {'one gradient, at the values of the handbook':^51} {'whole search':>15}",
             f"   {'':43} {'solved again':^17} {'on tape':^18}",
             f"   {'way':36} {'code':6} {'networks':>8} {'closures':>8} {'entries':>8} {'bytes':>9} {'time':>7} "
             f"{'error':>6} {'steps':>6} {'time':>7}"]
    for way in told.ways.values():
        work = way.work
        counts = " ".join(f"{number:{width},}" if number else f"{'-':>{width}}" for number, width in (
            (work.network_solves, 8), (work.closure_solves, 8), (work.operations, 8), (work.most_bytes, 9)))
        rest = f"{way.found.steps:6} {way.search_seconds:5.1f} s" if way.found else f"{'-':>6} {'-':>7}"
        lines.append(f"   {way.name:36} {TARGETS[way.target]:6} {counts} {_ms(way.seconds):>7} {way.error:6.0e} {rest}")
    chain = told.survey.chain(told.found.z)
    apart = max(abs(a - b)*factor/error for way in told.ways.values() if way.found
                for a, b, factor, error in zip(way.found.z, told.found.z, chain, told.errors))
    return lines + _wrapped(
        "Error: of the worst derivative, against imaginary steps of 1e-40 through a second model, written apart. Every "
        "row solves its networks with the closures' own tangents, a gift to the rivals. Differences: the best of six "
        "steps, chosen by the exact answer; networks start from the state at hand; \"of closures\" keeps the network's "
        "adjoint. Tapes: closures start cold; what no derivative passes through is not recorded; the tape through the "
        "loops keeps the network's adjoint and starts anew for each closure; bytes: of the longest tape. C is "
        "called from Python, a closure at a time, and the call costs more than the work. "
        f"All searches end within {apart:.0e} standard errors of each other.")


def _lessons(told):
    ways = told.ways
    first = ways["adjoints"]
    plain = ways.get("plain", first)        # in the tapes' language
    share = [error/value for error, value in zip(told.errors, told.survey.values(told.found.z))]
    vague = told.survey.unknowns[share.index(max(share))].name
    lines = ["5. What to learn from it"]
    for text in (
        f"The network's adjoint saves most: differences of it all took {ways['forward'].seconds/first.seconds:.0f} to "
        f"{ways['central'].seconds/first.seconds:.0f} times as long for one gradient, and would take longer with every "
        "further unknown; the adjoint would not. (A search also solves its networks, alike in every row.)",
        f"Inside that adjoint, differences of the closures cost {ways['closures'].seconds/first.seconds:.1f} times the "
        f"closed form and have {_digits(ways['closures'].error)} digits instead of {_digits(first.error)}. Their step "
        "came from the exact answer, which nobody has in earnest.",
        f"A tape through the loops has the digits, at {ways['loops'].seconds/plain.seconds:.0f} times the time of the "
        f"closed form in the same language; through it all, {ways['whole'].seconds/plain.seconds:.0f} times.",
        f"A tape knows steps, not roots. Started at the root there was no step to record: {told.blind} of the "
        f"{len(told.errors)} derivatives came out as exactly 0, and nothing said so.",
        f"The answer is as good as its readings: \"{vague}\" is known to {100*max(share):.0f} percent only.",
    ):
        lines += _wrapped(text, "   - ")
    lines += [f"   CHECK FAILED: {failure}" for failure in told.failures] or [
        "   Checked on the way: every junction's balance, the gradient, each unknown against the truth. "
        f"{told.seconds:.0f} s in all."]
    return lines + _wrapped("Invented data and a simple model, no guide for real mains: pressure systems follow local "
                            "codes and licensed practice.", "")


def _wrapped(text, mark="   "):
    return textwrap.wrap(text, WIDTH, initial_indent=mark, subsequent_indent=" "*len(mark))


def _digits(error):
    return math.floor(-math.log10(max(error, 1.0e-16)))


def _ms(seconds):
    return f"{1e3*seconds:.0f} ms" if seconds >= 0.01 else f"{1e3*seconds:.1f} ms"
