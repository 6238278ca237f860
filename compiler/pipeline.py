"""The stages composed: spec text -> checked Model -> Closure -> files -> loaded module. The only module that knows them all."""

import functools
import warnings
from dataclasses import replace
from importlib import resources
from pathlib import Path

from rootwright.spec.diagnostics import ERROR, Diagnostic, render
from rootwright.spec.reader import read
from rootwright.spec.source import MAX_BYTES


class SpecError(Exception):
    """A spec that cannot be used; `diagnostics` say why."""

    def __init__(self, diagnostics):
        super().__init__("\n" + "".join(render(diagnostic) for diagnostic in diagnostics))
        self.diagnostics = diagnostics


def shipped():
    """Names of the shipped specs."""
    return sorted(path.name.removesuffix(".toml") for path in resources.files("rootwright.specs").iterdir()
                  if path.name.endswith(".toml"))


def shipped_spec(name):
    """Bytes of a shipped spec."""
    return resources.files("rootwright.specs").joinpath(f"{name}.toml").read_bytes()


def schema():
    """Text of the JSON Schema of a spec."""
    return resources.files("rootwright.specs").joinpath("schema.json").read_text(encoding="utf-8")


def find(spec):
    """(bytes, name to show) of a spec: a file, or a shipped spec's bare name. Raises SpecError."""
    path = Path(spec)
    if spec in shipped() and not path.is_file():
        return shipped_spec(spec), f"{spec}.toml"
    try:
        with path.open("rb") as stream:
            return stream.read(MAX_BYTES + 1), spec         # the reader refuses what is longer
    except OSError as error:
        reason = "is a directory" if path.is_dir() else "no such file, and no shipped spec of that name" \
            if isinstance(error, FileNotFoundError) else "cannot be read"
        raise SpecError([Diagnostic(spec, 1, 1, 1, "", reason, "shipped specs: " + ", ".join(shipped()), ERROR)]) from None


def model(data, filename):
    """Checked Model and warnings. Raises SpecError."""
    checked, diagnostics = read(data, filename)
    if checked is None or any(d.severity == ERROR for d in diagnostics):
        raise SpecError(diagnostics)
    return checked, diagnostics


def closure(data, filename, order=1, precision="double"):
    """Closure of a spec's bytes, with derivatives up to an order (0, 1 or 2), and warnings. Raises SpecError.

    precision: "double", or "single" for the target "c".
    """
    from rootwright.calculus.precision import PRECISIONS
    from rootwright.calculus.soundness import examine

    checked, warnings = model(data, filename)
    closed, found = examine(checked, data, filename, order, PRECISIONS[precision])
    if closed is None:
        raise SpecError([*warnings, *found])
    return closed, (*warnings, *found)


def certificate_path(spec):
    """Where the certificate of a spec lies: beside it, NAME.proof for NAME.toml."""
    return Path(spec).with_suffix(".proof")


def certificate(spec):
    """Text of the certificate beside a spec (a file, or a shipped spec's name, or its file name); None where there is none."""
    name = spec.removesuffix(".toml")
    if name in shipped() and not Path(spec).is_file():
        resource = resources.files("rootwright.specs").joinpath(f"{name}.proof")
        return resource.read_text(encoding="utf-8") if resource.is_file() else None
    try:
        return certificate_path(spec).read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError):
        return None


def promised(closed, spec):
    """(Closure with what the certificate beside its spec proves, reason why that counts for nothing or "")."""
    from rootwright.proof.promise import promise

    text = certificate(spec)
    if text is None:
        return closed, ""
    try:
        return replace(closed, promise=promise(text, closed.model)), ""
    except ValueError as error:
        return closed, str(error)


def promising(spec, order=1):
    """Closure of a spec (a file, or a shipped spec's name) with what the certificate beside it proves. Raises SpecError."""
    return promised(closure(*find(spec), order)[0], spec)[0]


def has_root_proved(closed):
    """True where the certificate that came along proves that there is a root, and only one."""
    return closed.promise is not None and {"exists", "unique"} <= set(closed.promise.proved)


def prove(job, workers=1, progress=None):
    """(Certificate, contradictions) of a job (spec, boxes or None, seconds or None); a spec that is known to be valid.

    `progress(text)` is told how far it is.
    """
    from rootwright.evidence.proving import certify

    spec, boxes, seconds = job
    closed, _ = closure(*find(spec))
    limits = {name: value for name, value in (("boxes", boxes), ("seconds", seconds)) if value is not None}

    def show(stage, boxes, waiting, settled):
        progress(f"{spec}: {stage}, {boxes:,} boxes, {waiting:,} waiting, {100 * settled:.1f} % settled")

    return certify(closed, workers=workers, progress=show if progress else None, **limits)


def plan(closed):
    """The Plan of a Closure: how its module comes to the root, and why."""
    from rootwright.plan.choose import choose

    return choose(closed)


def emit(closed, target="c", chosen=None, **options):
    """Files of the module, {name: text}, for a Plan; the one that `plan` chooses where none is given.

    options: `assemble` lists them; raises its Unsuitable.
    """
    from rootwright.emit.assemble import assemble

    return assemble(closed, target, chosen or plan(closed), **options)


def load(spec, target="c", order=1, chosen=None):
    """Compile a spec (a file, or a shipped spec's name) and load it: an object with the functions of the emitted module, for a Plan
    as in `emit`."""
    from rootwright.binding.module import load as load_module

    closed = promising(str(spec), order)
    return load_module(closed, emit(closed, target, chosen), target)


def remake(data, filename, options):
    """Texts that this compiler emits for a spec with the options that an emitted file names; None where it cannot."""
    from rootwright.plan.plan import PLAIN

    others = {name.replace("-", "_"): value or True for name, value in options.items()}
    shaping = {"order": int(others.pop("order", 1)), "precision": others.pop("precision", "double")}
    try:
        closed, _ = closure(data, filename, **shaping)
        closed, _ = promised(closed, filename)
        chosen = PLAIN if others.pop("plan", "chosen") == "plain" else None
        return tuple(emit(closed, chosen=chosen, **others).values())
    except (SpecError, LookupError, TypeError, ValueError):
        return None


def array_closure(data, filename, target=None, order=1):
    """ArrayClosure of a spec's bytes, built or taken from the cache.

    target: "c", "python", or None for C where there is a compiler, else Python.
    Raises SpecError, NoCompiler and BuildFailed (target "c"), ValueError for options that there are not.
    """
    from rootwright.binding.arrays import ArrayClosure
    from rootwright.binding.build import BuildFailed, NoCompiler

    if target not in (None, "c", "python"):
        raise ValueError(f'target is {target!r}; it can be "c", "python" or None')
    if order not in (0, 1, 2):
        raise ValueError(f"order is {order!r}; it can be 0, 1 or 2")
    checked, _ = model(data, filename)
    try:
        module = _cached(checked, data, filename, target or "c", order)
    except (NoCompiler, BuildFailed) as error:
        if target is not None:
            raise
        _say_slower(str(error).splitlines()[0])
        module = _cached(checked, data, filename, "python", order)
    return ArrayClosure(module, checked, (array_closure, (data, filename, target, order)))


def _cached(checked, data, filename, target, order):
    from rootwright.binding.build import FLAGS, compiler_version, find_compiler
    from rootwright.binding.cache import fetch, key
    from rootwright.binding.module import make, open_module

    def made():
        closed, _ = closure(data, filename, order)
        closed, _ = promised(closed, filename)
        return make(checked, emit(closed, target), target, order)

    shaping = [checked.digest, certificate(filename), target, str(order)]
    if target == "c":
        compiler = find_compiler()
        shaping += [compiler, compiler_version(compiler), *FLAGS]
    suffix = ".so" if target == "c" else ".py"
    return fetch(key(*shaping), suffix, made, lambda path: open_module(path, checked, target, order))


@functools.cache
def _say_slower(reason):
    """Say once in a process that arrays go through the Python target."""
    warnings.warn(f"{reason}; closures run in Python, which is some hundred times slower", RuntimeWarning, stacklevel=4)
