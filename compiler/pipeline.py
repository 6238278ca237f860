"""The stages composed: spec text -> checked Model -> Closure -> files -> loaded module. The only module that knows them all."""

from importlib import resources
from pathlib import Path

from rootwright.spec.diagnostics import ERROR, Diagnostic
from rootwright.spec.reader import read
from rootwright.spec.source import MAX_BYTES


class SpecError(Exception):
    """A spec that cannot be used; `diagnostics` say why."""

    def __init__(self, diagnostics):
        super().__init__(f"{len(diagnostics)} problems")
        self.diagnostics = diagnostics


def shipped():
    """Names of the shipped specs."""
    return sorted(path.name.removesuffix(".toml") for path in resources.files("rootwright.specs").iterdir()
                  if path.name.endswith(".toml"))


def find(spec):
    """(bytes, name to show) of a spec: a file, or a shipped spec's bare name. Raises SpecError."""
    path = Path(spec)
    if spec in shipped() and not path.is_file():
        return resources.files("rootwright.specs").joinpath(f"{spec}.toml").read_bytes(), f"{spec}.toml"
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


def closure(data, filename):
    """Closure of a spec's bytes, and warnings. Raises SpecError."""
    from rootwright.calculus.soundness import examine

    checked, warnings = model(data, filename)
    closed, found = examine(checked, data, filename)
    if closed is None:
        raise SpecError([*warnings, *found])
    return closed, (*warnings, *found)


def emit(closed, target="c"):
    """Files of the module, {name: text}."""
    from rootwright.emit.assemble import assemble

    return assemble(closed, target)


def load(spec, target="c"):
    """Compile a spec (a file, or a shipped spec's name) and load it: an object with the functions of the emitted module."""
    from rootwright.binding.module import load as load_module

    closed, _ = closure(*find(str(spec)))
    return load_module(closed, emit(closed, target), target)
