"""The command line: arguments, files, exit status. Nothing is computed here; heavy modules are imported where used."""

import argparse
import contextlib
import functools
import io
import json
import os
import shlex
import sys
from pathlib import Path

from rootwright.version import __version__

OK, FOUND, WRONG, INTERRUPTED = 0, 1, 2, 130

_SPEC, _SPECS = {"dest": "spec"}, {"dest": "specs", "nargs": "+"}
_STATUS = "exit status: 0 all well; 1 the command ran and found something wrong; 2 the input or the usage is wrong"


class Refusal(Exception):
    """The input or the usage is wrong; the message is one line that says what, and how to mend it."""


def main(argv=None):
    """Run a command line (the process's own by default) and return its exit status. Nothing is raised."""
    _tame(sys.stdout)
    _tame(sys.stderr)
    try:
        try:
            arguments = _parser().parse_args(argv)
        except SystemExit as done:          # argparse has printed help or what is wrong
            return int(done.code or OK)
        status = arguments.run(arguments)
        if sys.stdout is not None:
            sys.stdout.flush()
        return status
    except Refusal as refusal:
        return _complain(str(refusal), WRONG)
    except KeyboardInterrupt:
        return _complain("interrupted", INTERRUPTED)
    except BrokenPipeError:
        _discard_stdout()
        return FOUND
    except OSError as error:
        _discard_stdout()
        place = f"{error.filename}: " if error.filename else "output: "
        return _complain(f"{place}{error.strerror or error}; is the disk full, or the place not writable?", WRONG)
    except Exception as error:
        return _complain(_explained(error), WRONG)


def _explained(error):
    from rootwright.binding.build import BuildFailed

    first, *_ = [*str(error).splitlines(), "no message"]
    if isinstance(error, BuildFailed):
        return f"the C compiler refused the module ({first}); set CC to another one, or use the Python target"
    return f"a defect of rootwright, not of the spec: {type(error).__name__}: {first}; please report it with the spec"


def _parser():
    parser = argparse.ArgumentParser(
        prog="rootwright", allow_abbrev=False, epilog=_STATUS,
        description="From one scalar equation, written in a spec, to a standalone solver with exact derivatives of its "
                    "root.")
    parser.add_argument("--version", action="version", version=f"rootwright {__version__}")
    commands = parser.add_subparsers(metavar="COMMAND", required=True)

    check = _command(commands, "check", _check, "read and validate specs; print each like a page of a handbook", _SPECS)
    _add_json(check)

    prove = _command(
        commands, "prove", _prove, "settle, over the whole operating range, what holds", _SPECS,
        "Each claim is proved, refuted with a witness, or open with the share of the range that is left. Exits 1 when a claim is "
        "refuted (with --strict, also when one is open).")
    prove.add_argument("--boxes", type=_number_of("boxes"), metavar="N", help="boxes to look at for each spec, the same on every machine")
    prove.add_argument("--seconds", type=_seconds, metavar="S", help="stop each spec after the wave at hand when S seconds are over")
    prove.add_argument("--workers", type=_number_of("workers"), default=1, metavar="N",
                       help="processes that prove specs side by side; the results do not depend on it (default 1)")
    prove.add_argument("--strict", action="store_true", help="exit 1 unless every claim is proved")
    prove.add_argument("--save", action="store_true", help="write the certificate beside the spec, as NAME.proof; compile reads it")
    prove.add_argument("--replay", metavar="OUT.csv", 
                       help="write the witnesses, and the points where the module contradicts the proof, as points that eval takes (one spec)")
    _add_json(prove)

    compile_ = _command(commands, "compile", _compile, "write a standalone module for each spec", _SPECS)
    compile_.add_argument("--into", metavar="DIR", default=".",
                          help="folder to write to, made where it is missing (default: the current one)")
    compile_.add_argument("--target", choices=("c", "python"), default="c",
                          help="c: NAME.h and NAME.c (default); python: NAME.py")
    compile_.add_argument("--single-header", action="store_true",
                          help="c: all in NAME.h; one source file defines NAME_IMPLEMENTATION before it includes it")
    compile_.add_argument("--fortran", action="store_true",
                          help="c: NAME_module.f90 besides, the interface for Fortran (iso_c_binding)")
    compile_.add_argument("--precision", choices=("double", "single"), default="double",
                          help="arithmetic of the module: double (default); c: single, float throughout")
    compile_.add_argument("--require-proof", action="store_true",
                          help="write nothing unless existence and uniqueness of the root are proved for this very spec")
    compile_.add_argument("--plan", choices=("chosen", "plain"), default="chosen",
                          help="chosen: a short way to the root goes before the safeguarded solver where that pays (default); "
                               "plain: the safeguarded solver alone")
    _add_order(compile_, "derivatives in the module: 0 none, 1 first (default), 2 with hessian and tangent_adjoint")

    evaluate = _command(
        commands, "eval", _eval,
        "solve at the points of a CSV file; write a CSV with roots, outputs, derivatives, status", _SPEC,
        "The input has one column for each parameter, named in its first line; other columns pass through. A row that "
        "is ragged or has a cell that is no number gets the status bad_input, with missing cells empty and surplus "
        "ones kept in the last column. Exits 1 when any row is left without a root.")
    evaluate.add_argument("--points", metavar="IN.csv", required=True, help="points to solve at; - for standard input")
    evaluate.add_argument("--out", metavar="OUT.csv", default="-",
                          help="where to write; - for standard output (default)")
    _add_order(evaluate, "derivatives in the table: 0 none, 1 first (default), 2 first and second")
    evaluate.add_argument("--target", choices=("c", "python"), default="c",
                          help="which module solves (default c; python where there is no C compiler)")

    verify = _command(commands, "verify", _verify,
                      "hold modules against a high-precision reference and the published values", _SPECS)
    verify.add_argument("--points", type=_number_of("points"), default=200, metavar="N",
                        help="points of the operating range (default 200)")
    verify.add_argument("--seed", type=int, default=1, metavar="S", help="seed of the random points (default 1)")
    _add_order(verify, "derivatives to hold against the reference: 0 none, 1 first (default), 2 first and second")
    _add_json(verify)

    fresh = _command(
        commands, "fresh", _fresh, "tell whether the emitted files in a tree still match their specs and this compiler",
        details="Every file that says it was made by rootwright is made again, in memory, with its own options, and "
                "compared: fresh, stale (the spec or the compiler has changed), edited (by hand), orphaned (no spec of "
                "its name in the tree or among the shipped ones). Exits 1 unless all are fresh. Hidden folders are "
                "left out.")
    fresh.add_argument("folders", metavar="DIR", nargs="*", default=["."],
                       help="folders to walk, for emitted files and specs (default: the current one)")
    _add_json(fresh)

    new = _command(commands, "new", _new, "write a commented spec to start from",
                   details="It solves already, and passes check. No file is overwritten.")
    new.add_argument("name", metavar="NAME", help="name of the closure; the file is NAME.toml")
    new.add_argument("--into", metavar="DIR", default=".",
                     help="folder to write to, made where it is missing (default: the current one)")

    _command(commands, "schema", _schema, "print the JSON Schema (draft 2020-12) of a spec, for editors")

    bench = _command(commands, "bench", _bench,
                     "time modules against derivatives taped through the iterations, differences, and general solvers", _SPECS,
                     details="One spec takes about half a minute, a minute with every library that it knows; several share "
                             "the time of the measurement, and take some fifteen seconds each. Goals are met, open or "
                             "missed, and change no exit status: it is 1 where a module itself is wrong, at a point "
                             "without its root or with a derivative that is off.")
    bench.add_argument("--plot", metavar="DIR", help="folder to write a picture NAME.png to (needs matplotlib)")
    _add_json(bench)

    _command(commands, "demo", _demo, "a whole job on an invented water main, start to end")
    return parser


def _command(commands, name, run, summary, spec=None, details=""):
    """A command that runs `run(arguments)`; spec: how its specs are declared, None where it takes none."""
    description = f"{summary[0].upper()}{summary[1:]}. {details}".strip()
    command = commands.add_parser(name, help=summary, description=description, allow_abbrev=False, epilog=_STATUS)
    if spec is not None:
        command.add_argument(metavar="SPEC", help="a spec file, or the bare name of a shipped spec", **spec)
    command.set_defaults(run=run)
    return command


def _add_json(command):
    command.add_argument("--json", action="store_true",
                         help="print one JSON object; for several specs its one member `specs` lists their objects")


def _add_order(command, text):
    command.add_argument("--order", type=_order, default=1, metavar="0|1|2", help=text)


def _order(text):
    if text in ("0", "1", "2"):
        return int(text)
    raise argparse.ArgumentTypeError(f"{text!r} is not 0, 1 or 2")


def _number_of(what):
    def number(text):
        if text.isdecimal() and 0 < int(text) <= 10**7:
            return int(text)
        raise argparse.ArgumentTypeError(f"{text!r} is not a number of {what}; give one from 1 to 10000000")
    return number


def _seconds(text):
    try:
        seconds = float(text)
    except ValueError:
        seconds = 0.0
    if 0.0 < seconds < 1e9:
        return seconds
    raise argparse.ArgumentTypeError(f"{text!r} is not a time in seconds; give one above 0")


# -- commands


def _check(arguments):
    from rootwright import pipeline
    from rootwright.binding.module import load
    from rootwright.evidence.page import describe, render
    from rootwright.plan.plan import PLAIN

    def show(closure, spec):
        facts = describe(closure, load(closure, pipeline.emit(closure, "python", PLAIN), "python"))
        return facts, "" if arguments.json else render(facts), OK

    return _each(arguments, show)


def _verify(arguments):
    from rootwright.evidence.verify import render, to_json, verify

    def show(closure, spec):
        with _progress() as progress:
            report = verify(closure, points=arguments.points, seed=arguments.seed, progress=progress)
        return to_json(report), "" if arguments.json else render(report), FOUND if report.failed else OK

    return _each(arguments, show, arguments.order)


def _prove(arguments):
    from dataclasses import asdict

    from rootwright import pipeline
    from rootwright.evidence.proving import failed, in_processes, table, told, write_replay
    from rootwright.proof.certificate import dump, render, to_json

    if arguments.replay and len(arguments.specs) > 1:
        raise Refusal("--replay takes one spec at a time")
    closures = [(spec, *_closure(spec)) for spec in arguments.specs]
    jobs = [(spec, arguments.boxes, arguments.seconds) for spec, closure, _ in closures if closure is not None]
    certificates, against, found, worst = {}, {}, [], OK
    with _progress() as progress:
        work = pipeline.prove
        if len(jobs) == 1 or arguments.workers == 1:        # then boxes are spread over the processes, and progress is seen
            work = functools.partial(work, workers=arguments.workers, progress=progress)
        for (spec, *_), (certificate, contradictions) in zip(jobs, in_processes(work, jobs, arguments.workers)):
            certificates[spec], against[spec] = certificate, contradictions
            if progress:
                progress(f"{len(certificates)} of {len(jobs)} specs proved: {spec}")
    for spec, closure, diagnostics in closures:
        certificate = certificates.get(spec)
        worst = max(worst, WRONG if certificate is None else FOUND if failed(certificate, arguments.strict) or against[spec] else OK)
        found.append({"spec": spec, "valid": closure is not None} | (to_json(certificate) if certificate else {})
                     | ({"contradictions": [asdict(each) | {"point": dict(each.point)} for each in against[spec]]} if certificate else {})
                     | {"diagnostics": diagnostics})
        if certificate and arguments.save:
            _write(pipeline.certificate_path(spec), dump(certificate), arguments.json)
        if certificate and arguments.replay:
            with _sink(arguments.replay) as stream:
                write_replay(stream, certificate, against[spec])
    if arguments.json:
        print(json.dumps(_finite(found[0] if len(found) == 1 else {"specs": found}), indent=2))
    elif len(certificates) == 1:
        print("\n".join([render(*certificates.values()), *told(*against.values())]))
    elif certificates:
        print("\n".join([*table(list(certificates.values())), *(line for each in against.values() for line in told(each))]))
    return worst


def _write(path, text, quiet):
    from rootwright.files import replacing

    with replacing(path) as stream:
        stream.write(text.encode("utf-8"))
    if not quiet:
        print(f"{path}  {len(text.encode('utf-8')):,} bytes")


def _bench(arguments):
    from rootwright import pipeline
    from rootwright.binding.build import BuildFailed, NoCompiler
    from rootwright.evidence.bench.benchmark import PROCESSES, NotMeasured, benchmark, share
    from rootwright.evidence.bench.measure import crew
    from rootwright.evidence.bench.page import render
    from rootwright.evidence.bench.plot import available, plot

    if arguments.plot is not None:
        if not available():
            raise Refusal("--plot needs matplotlib: install rootwright[plots], or leave the option out")
        _make(Path(arguments.plot))

    def show(closure, spec):
        closure, _ = pipeline.promised(closure, spec)
        try:
            with _progress() as progress:
                facts = benchmark(closure, pipeline.plan(closure), processes, share(len(arguments.specs)), progress=progress)
        except (NoCompiler, BuildFailed, NotMeasured) as error:
            raise Refusal(f"{closure.model.name}: {error}") from None
        if arguments.plot is not None:
            plot(facts, Path(arguments.plot)/f"{closure.model.name}.png")
        return facts, "" if arguments.json else render(facts), FOUND if facts["wrong"] else OK

    with crew(PROCESSES) as processes:
        return _each(arguments, show)


def _each(arguments, show, order=1):
    """Run `show(closure, spec) -> (JSON data, text, status)` on every spec and print what it found: worst status."""
    found, worst = [], OK
    for k, spec in enumerate(arguments.specs):
        closure, diagnostics = _closure(spec, order)
        data, text, status = ({}, "", WRONG) if closure is None else show(closure, spec)
        worst = max(worst, status)
        found.append({"spec": spec, "valid": closure is not None} | data | {"diagnostics": diagnostics})
        if text:
            print(("\n\n" if k else "") + text, end="")
    if arguments.json:
        print(json.dumps(_finite(found[0] if len(found) == 1 else {"specs": found}), indent=2))
    return worst


def _finite(data):
    """The data with NaN and infinities, which JSON has not, as null."""
    if isinstance(data, dict):
        return {key: _finite(value) for key, value in data.items()}
    if isinstance(data, (list, tuple)):
        return [_finite(value) for value in data]
    return None if isinstance(data, float) and data - data != 0.0 else data


def _compile(arguments):
    from rootwright import pipeline
    from rootwright.emit.assemble import Unsuitable
    from rootwright.files import replacing
    from rootwright.plan.plan import PLAIN

    worst, written = OK, {}
    options = {name: True for name in ("single_header", "fortran") if getattr(arguments, name)}
    of_c = [f"--{name.replace('_', '-')}" for name in options] + ["--precision single"]*(arguments.precision == "single")
    if of_c and arguments.target != "c":
        raise Refusal(f"{of_c[0]} is for the C target; leave it or --target out")
    for spec in arguments.specs:
        closure, _ = _closure(spec, arguments.order, arguments.precision)
        if closure is None:
            worst = WRONG
            continue
        _, lacking = pipeline.promised(closure, spec)
        if lacking:
            print(f"{spec}: its certificate counts for nothing: {lacking}; prove it again with: rootwright prove --save {spec}",
                  file=sys.stderr)
        if arguments.require_proof and not pipeline.has_root_proved(closure):
            print(f"{spec}: existence and uniqueness of the root are not proved; nothing is written\n"
                  f"  prove them with: rootwright prove --save {spec}", file=sys.stderr)
            worst = max(worst, FOUND)
            continue
        plan = PLAIN if arguments.plan == "plain" else pipeline.plan(closure)
        try:
            files = pipeline.emit(closure, arguments.target, plan, **options)
        except Unsuitable as error:
            raise Refusal(f"{spec}: {error}") from None
        clash = next((name for name in files if name in written), None)
        if clash:
            raise Refusal(f"{spec}: {clash} was just written for {written[clash]}; give the specs different names, or "
                          "compile into different folders")
        folder = Path(arguments.into)
        _make(folder)
        with contextlib.ExitStack() as stack:
            for name, text in files.items():
                stack.enter_context(replacing(folder/name)).write(text.encode("utf-8"))
        for name, text in files.items():
            written[name] = spec
            print(f"{folder/name}  {len(text.encode('utf-8')):,} bytes")
        for line in plan.why:
            print(f"    {line}")
    return worst


def _make(folder):
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise Refusal(f"{folder}: {error.strerror}; name a folder that is there, or can be made, with --into") from None


def _eval(arguments):
    from rootwright.evidence.evaluate import TableError, evaluate, is_rootless

    closure, _ = _closure(arguments.spec, arguments.order)
    if closure is None:
        return WRONG
    module = _load(closure, arguments.target)
    with contextlib.ExitStack() as stack:
        source = stack.enter_context(_source(arguments.points))
        sink = stack.enter_context(_sink(arguments.out))
        progress = stack.enter_context(_progress())
        try:
            counts = evaluate(closure.model, module, source, sink, arguments.order, progress)
        except TableError as error:
            raise Refusal(f"{_shown(arguments.points, 'standard input')}: {error}") from None
    total = sum(counts.values())
    words = ", ".join(f"{count:,} {word}" for word, count in counts.items())
    print(f"{total:,} row{'s'*(total != 1)}" + (f": {words}" if words else ""), file=sys.stderr)
    return FOUND if any(is_rootless(word) for word in counts) else OK


def _fresh(arguments):
    from rootwright import pipeline
    from rootwright.evidence.freshness import FRESH, counts, render, survey, to_json

    for folder in arguments.folders:
        if not os.path.isdir(folder):
            raise Refusal(f"{folder}: not a folder; name the folders that hold emitted files and their specs")
    shipped = {name: pipeline.shipped_spec(name) for name in pipeline.shipped()}
    findings = survey(arguments.folders, shipped, pipeline.remake)
    print(json.dumps(to_json(findings), indent=2) if arguments.json else render(findings))
    return OK if set(counts(findings)) <= {FRESH} else FOUND


def _new(arguments):
    from rootwright.spec.names import quoted, refusal
    from rootwright.spec.starter import starter

    refused = refusal(arguments.name, is_module=True)
    if refused:
        raise Refusal(f"the name {quoted(arguments.name)} {refused[0]}; {refused[1]}")
    folder = Path(arguments.into)
    _make(folder)
    path = folder/f"{arguments.name}.toml"
    try:
        with open(path, "x", encoding="utf-8", newline="\n") as stream:
            stream.write(starter(arguments.name))
    except FileExistsError:
        raise Refusal(f"{path} is there already; choose another name, or take the file away") from None
    print(f"{path}\nnext: rootwright check {shlex.quote(str(path))}")
    return OK


def _schema(arguments):
    from rootwright import pipeline

    print(pipeline.schema(), end="")
    return OK


def _demo(arguments):
    from rootwright.demo import story

    page = io.StringIO()
    with _progress() as progress:
        status = story.run(page, progress)
    print(page.getvalue(), end="")
    return status


# -- specs, files, streams


def _closure(spec, order=1, precision="double"):
    """(Closure or None, diagnostics as data); what is wrong goes to stderr."""
    from rootwright import pipeline
    from rootwright.spec.diagnostics import harmless, render

    try:
        data, filename = pipeline.find(spec)
    except pipeline.SpecError as error:
        for diagnostic in error.diagnostics:
            print(f"{harmless(spec)}: {diagnostic.message}\n  {diagnostic.help}", file=sys.stderr)
        return None, [_as_data(diagnostic) for diagnostic in error.diagnostics]
    try:
        closure, diagnostics = pipeline.closure(data, filename, order, precision)
    except pipeline.SpecError as error:
        closure, diagnostics = None, error.diagnostics
    print("\n".join(render(diagnostic) for diagnostic in diagnostics), end="", file=sys.stderr)
    if closure is not None:
        closure, _ = pipeline.promised(closure, spec)
    return closure, [_as_data(diagnostic) for diagnostic in diagnostics]


def _as_data(diagnostic):
    names = ("severity", "file", "line", "column", "length", "message", "help")
    return {name: getattr(diagnostic, name) for name in names}


def _load(closure, target):
    from rootwright import pipeline
    from rootwright.binding.build import NoCompiler
    from rootwright.binding.module import load

    plan = pipeline.plan(closure)
    if target == "c":
        try:
            return load(closure, pipeline.emit(closure, "c", plan), "c")
        except NoCompiler as error:
            print(f"{error}; going on with the Python target, which is slower", file=sys.stderr)
    return load(closure, pipeline.emit(closure, "python", plan), "python")


def _shown(path, standard):
    return standard if path == "-" else path


def _source(path):
    """Binary stream to read from, as a context."""
    if path == "-":
        if sys.stdin is None:
            raise Refusal("standard input is closed; name a file with --points")
        return contextlib.nullcontext(sys.stdin.buffer)
    try:
        return open(path, "rb")
    except OSError as error:
        raise Refusal(f"{path}: {error.strerror}; give a CSV file with --points, or - for standard input") from None


@contextlib.contextmanager
def _sink(path):
    """Text stream to write to; a file appears, or is replaced, when all is written."""
    from rootwright.files import replacing

    if path == "-" and sys.stdout is None:
        raise Refusal("standard output is closed; name a file with --out")
    with contextlib.nullcontext(sys.stdout.buffer) if path == "-" else replacing(path) as binary:
        text = io.TextIOWrapper(binary, encoding="utf-8", newline="")
        try:
            yield text
            text.flush()
        finally:
            with contextlib.suppress(OSError):
                text.detach()


@contextlib.contextmanager
def _progress():
    """A function that shows a line of progress on a terminal, wiped away at the end; None where nobody watches."""
    if sys.stderr is None or not sys.stderr.isatty():
        yield None
        return

    def show(text):
        sys.stderr.write(f"\r\x1b[K{text}")
        sys.stderr.flush()

    try:
        yield show
    finally:
        show("")


def _tame(stream):
    """Let a stream print anything: what its encoding has not is escaped."""
    if isinstance(stream, io.TextIOWrapper):
        stream.reconfigure(errors="backslashreplace")


def _complain(message, status):
    from rootwright.spec.diagnostics import harmless

    with contextlib.suppress(OSError):
        print(f"rootwright: {harmless(' '.join(message.split()))}", file=sys.stderr)
    return status


def _discard_stdout():
    """Send what is still to be printed nowhere, so that the interpreter does not stumble over it when it ends."""
    with contextlib.suppress(OSError, ValueError, AttributeError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
