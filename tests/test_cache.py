"""The cache of built closures: found again, never stale, never half written, never in the way."""

import os
import subprocess
import sys
from pathlib import Path

import pytest
import rootwright
from rootwright.binding import build, cache, module

SPEC = """\
format = 1
name = "line"
[parameters]
a = { range = [1.0, 4.0] }
[unknown]
name = "x"
bracket = ["0", "99"]
[residual]
equation = "x = 2*a"
"""


@pytest.fixture
def home(tmp_path, monkeypatch):
    """The folder of an empty cache."""
    monkeypatch.setenv("ROOTWRIGHT_CACHE", str(tmp_path/"cache"))
    return tmp_path/"cache"


@pytest.fixture
def spec(tmp_path):
    (tmp_path/"line.toml").write_text(SPEC)
    return tmp_path/"line.toml"


@pytest.fixture
def builds(monkeypatch):
    """A list that grows by the order of every library that is built."""
    made, compile_library = [], build.compile_library

    def counted(name, files, n, m, order):
        made.append(order)
        return compile_library(name, files, n, m, order)

    monkeypatch.setattr(build, "compile_library", counted)
    return made


def stored(home, suffix):
    return [path for path in home.iterdir() if path.suffix == suffix]


def test_a_closure_is_built_once(home, spec, builds):
    assert [rootwright.load(spec)(3.0).x for _ in range(3)] == [6.0]*3 and len(builds) == 1
    assert sorted(path.suffix for path in home.iterdir()) == ["", ".so"]


def test_the_python_target_is_kept_too(home, spec, monkeypatch):
    assert rootwright.load(spec, target="python")(3.0).x == 6.0
    monkeypatch.setattr(module, "make", None)
    assert rootwright.load(spec, target="python")(3.0).x == 6.0 and len(stored(home, ".py")) == 1


def test_all_that_shapes_a_closure_makes_a_new_one(home, spec, builds, monkeypatch):
    rootwright.load(spec)
    spec.write_text(SPEC.replace("2*a", "5*a"))
    assert rootwright.load(spec)(3.0).x == 15.0 and len(builds) == 2
    spec.write_text(SPEC)
    assert rootwright.load(spec)(3.0).x == 6.0 and len(builds) == 2
    rootwright.load(spec, order=2)
    assert builds == [1, 1, 2]
    monkeypatch.setattr(build, "compiler_version", lambda compiler: "another version")
    rootwright.load(spec)
    assert len(builds) == 4
    monkeypatch.setattr(build, "FLAGS", (*build.FLAGS, "-DOTHER"))
    rootwright.load(spec)
    assert len(builds) == 5
    monkeypatch.setattr(cache, "_compiler_digest", lambda: "another source of this compiler")
    rootwright.load(spec)
    assert len(builds) == 6


def test_the_digest_of_the_compiler_covers_its_own_source_and_the_runtime():
    names = {name for name, _ in cache._sources(Path(cache.__file__).parent.parent, "")}
    assert {"emit/c.py", "binding/batch.c", "operations.py"} <= names
    assert "solver.c" in {name for name, _ in cache._sources(Path(cache.resources.files("rootwright.runtime")), "")}


@pytest.mark.parametrize("suffix", [".so", ""])
@pytest.mark.parametrize("damage", [b"", b"\0"*2000, None, "cut"])
def test_a_damaged_entry_is_built_anew_and_mended(home, spec, builds, suffix, damage):
    rootwright.load(spec)
    (path,) = stored(home, suffix)
    whole = path.read_bytes()
    path.unlink()
    if damage is not None:
        # A new file: the library that this process has loaded stays as it is.
        path.write_bytes(whole[:-1] if damage == "cut" else damage)
    assert rootwright.load(spec)(3.0).x == 6.0 and len(builds) == 2
    assert rootwright.load(spec)(3.0).x == 6.0 and len(builds) == 2


def test_an_intact_file_that_cannot_be_loaded_is_built_anew(home, spec, builds):
    rootwright.load(spec)
    (entry,), (library,) = stored(home, ""), stored(home, ".so")
    foreign = cache._store(home, "another", ".so", b"\x7fELF of another machine")
    entry.write_text(foreign.name)
    assert rootwright.load(spec)(3.0).x == 6.0 and len(builds) == 2 and library.exists()


def test_a_place_that_cannot_be_written_to_is_no_obstacle(spec, tmp_path, monkeypatch):
    (tmp_path/"file").write_text("in the way")
    monkeypatch.setenv("ROOTWRIGHT_CACHE", str(tmp_path/"file"/"cache"))
    assert rootwright.load(spec)(3.0).x == 6.0


@pytest.mark.skipif(os.name == "nt", reason="permissions of POSIX")
def test_code_is_not_loaded_from_a_folder_that_anyone_may_write_to(home, spec, builds):
    home.mkdir()
    home.chmod(0o777)
    assert rootwright.load(spec)(3.0).x == 6.0 and not list(home.iterdir())
    home.chmod(0o700)
    assert rootwright.load(spec)(3.0).x == 6.0 and len(list(home.iterdir())) == 2


@pytest.mark.skipif(os.name == "nt", reason="permissions of POSIX")
def test_the_cache_is_for_its_user_alone(home, spec):
    rootwright.load(spec)
    assert home.stat().st_mode & 0o777 == 0o700


def test_any_number_of_processes_may_build_the_same_closure_at_once(home, spec):
    script = f"import rootwright; print(rootwright.load({str(spec)!r})(3.0).x)"
    running = [subprocess.Popen([sys.executable, "-c", script], stdout=subprocess.PIPE, text=True) for _ in range(3)]
    assert [process.communicate()[0].strip() for process in running] == ["6.0"]*3
    (entry,) = stored(home, "")
    assert (home/entry.read_text()).exists() and len(list(home.iterdir())) == 1 + len(stored(home, ".so"))


@pytest.mark.skipif(os.name == "nt", reason="places of POSIX")
def test_the_cache_stands_where_the_user_keeps_caches(monkeypatch):
    """XDG Base Directory Specification: XDG_CACHE_HOME, ~/.cache where it is not set; a relative path there is ignored."""
    for name in ("ROOTWRIGHT_CACHE", "XDG_CACHE_HOME"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("HOME", "/home/me")
    assert cache.folder() == Path("/home/me/.cache/rootwright")
    monkeypatch.setenv("XDG_CACHE_HOME", "relative")
    assert cache.folder() == Path("/home/me/.cache/rootwright")
    monkeypatch.setenv("XDG_CACHE_HOME", "/caches")
    assert cache.folder() == Path("/caches/rootwright")
    monkeypatch.setenv("ROOTWRIGHT_CACHE", "/mine")
    assert cache.folder() == Path("/mine")
