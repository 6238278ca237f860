"""Writing files so that nobody ever reads half of one."""

import contextlib
import os
import secrets
import shutil


@contextlib.contextmanager
def replacing(path):
    """A binary stream whose content takes the place of the file `path` when the block ends well.

    Otherwise the old file stays and nothing is left behind. What is there and no regular file (a device, a pipe) is
    written to directly. Raises OSError.
    """
    path = os.path.realpath(path)
    if os.path.exists(path) and not os.path.isfile(path):
        with open(path, "wb") as stream:
            yield stream
        return
    temporary = os.path.join(os.path.dirname(path), f".rootwright-{secrets.token_hex(8)}")
    try:
        stream = open(temporary, "xb")
    except OSError as error:
        raise OSError(error.errno, error.strerror, path) from None
    try:
        with stream:
            yield stream
        if os.path.exists(path):
            shutil.copymode(path, temporary)
        os.replace(temporary, path)
    except BaseException:
        with contextlib.suppress(OSError):
            os.unlink(temporary)
        raise
