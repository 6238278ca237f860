"""Built closures on disk, found by what they were built from.

A file is stored under the digest of its own content, and an index entry, named by the digest of all that shaped it,
says which file that is. Both appear whole or not at all (a temporary file, renamed), so any number of processes may
build the same closure at once. An entry that does not fit its file is built anew. The folder may be deleted any time.
"""

import atexit
import contextlib
import functools
import hashlib
import os
import platform
import re
import shutil
import sys
import tempfile
from importlib import resources
from pathlib import Path

from rootwright.files import replacing

_SHAPING = (".py", ".c", ".j2")          # files of the compiler that shape what it builds


def folder():
    """The cache folder: ROOTWRIGHT_CACHE, else `rootwright` in the user's own one (XDG Base Directory Specification;
    LOCALAPPDATA on Windows)."""
    named = os.environ.get("ROOTWRIGHT_CACHE")
    if named:
        return Path(named)
    home = os.environ.get("LOCALAPPDATA" if os.name == "nt" else "XDG_CACHE_HOME", "")
    return Path(home if os.path.isabs(home) else os.path.expanduser("~/.cache"), "rootwright")


def key(*shaping):
    """Name of the entry for texts that shape a build: the spec's digest, options, the C compiler and its version."""
    machine = sys.platform, platform.machine(), str(sys.maxsize)
    return hashlib.sha256(repr((_compiler_digest(), machine, shaping)).encode()).hexdigest()


@functools.cache
def _compiler_digest():
    """Digest of this compiler's own source: more than its version, which a source tree keeps while it changes."""
    digest = hashlib.sha256()
    for package in ("rootwright", "rootwright.runtime"):
        for name, content in sorted(_sources(resources.files(package), "")):
            digest.update(f"{package}/{name} {len(content)}\n".encode() + content)
    return digest.hexdigest()


def _sources(place, prefix):
    for item in place.iterdir():
        if item.is_dir():
            yield from _sources(item, f"{prefix}{item.name}/")
        elif item.name.endswith(_SHAPING):
            yield f"{prefix}{item.name}", item.read_bytes()


def fetch(entry, suffix, make, load):
    """load(path) of the file with the content make(), from the cache where an intact one is there.

    Otherwise the content is made and stored; where it cannot be stored, or not be loaded from there, a temporary folder
    serves. make returns bytes; load raises OSError for a file that cannot be used.
    """
    home = folder()
    path = _intact(home, entry)
    if path is not None:
        with contextlib.suppress(OSError):
            return load(path)
    content = make()
    with contextlib.suppress(OSError):
        return load(_store(home, entry, suffix, content))
    return load(temporary(content, suffix))


def _intact(home, entry):
    """Path of the file of an entry; None where there is none, or it does not fit, or others may have put it there."""
    try:
        if not _is_ours(home):
            return None
        name = (home/entry).read_text(encoding="ascii")
        is_name = re.fullmatch(r"[0-9a-f]{64}\.\w+", name)
        if is_name and hashlib.sha256((home/name).read_bytes()).hexdigest() == name[:64]:
            return home/name
    except (OSError, ValueError):
        pass
    return None


def _store(home, entry, suffix, content):
    home.mkdir(mode=0o700, parents=True, exist_ok=True)
    if not _is_ours(home):
        raise PermissionError(f"{home} belongs to others")
    path = home/f"{hashlib.sha256(content).hexdigest()}{suffix}"
    with replacing(path) as stream:
        stream.write(content)
    with replacing(home/entry) as stream:
        stream.write(path.name.encode("ascii"))
    return path


def _is_ours(home):
    """Whether nobody but this user and the system's administrator can have put code there."""
    if os.name == "nt":
        return True
    about = home.stat()
    return about.st_uid in (0, os.geteuid()) and not about.st_mode & 0o002


def temporary(content, suffix):
    """Path of a file with that content, in a folder that goes when the process ends."""
    home = Path(tempfile.mkdtemp(prefix="rootwright-"))
    atexit.register(shutil.rmtree, home, ignore_errors=True)
    path = home/f"{hashlib.sha256(content).hexdigest()}{suffix}"
    path.write_bytes(content)
    return path
