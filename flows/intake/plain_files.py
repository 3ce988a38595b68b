"""Opening what a site uploaded: regular files inside one folder, through no link, without waiting on a pipe."""

from __future__ import annotations

import errno
import os
import stat
from io import BufferedReader
from pathlib import Path

from flows.errors import InputError

_FAULTS_OF_THE_FILE = {
    errno.EACCES,
    errno.EPERM,
    errno.ELOOP,
    errno.ENOENT,
    errno.ENOTDIR,
    errno.EISDIR,
    errno.EIO,
    errno.ENXIO,
    errno.ENAMETOOLONG,
}


def open_inside(root: Path, path: str) -> BufferedReader:
    """Return the regular file at the plain relative ``path`` under ``root``, open for reading.

    ``root`` itself and every step below it are opened without following links, so a folder swapped for a link meanwhile leads nowhere.
    Raises InputError for links, pipes, devices, folders and what cannot be read; errors of the machine (memory, handles) pass through.
    """
    *folders, name = path.split("/")
    try:
        held = os.open(root, os.O_RDONLY | os.O_DIRECTORY | os.O_NOFOLLOW)
    except OSError as failure:
        raise explained(failure, root.name) from None
    try:
        for folder in folders:
            inner = os.open(folder, os.O_RDONLY | os.O_DIRECTORY | os.O_NOFOLLOW, dir_fd=held)
            os.close(held)
            held = inner
        descriptor = os.open(name, os.O_RDONLY | os.O_NOFOLLOW | os.O_NONBLOCK, dir_fd=held)
    except OSError as failure:
        raise explained(failure, path) from None
    finally:
        os.close(held)
    if not stat.S_ISREG(os.fstat(descriptor).st_mode):
        os.close(descriptor)
        raise not_a_file(path)
    return os.fdopen(descriptor, "rb")


def explained(failure: OSError, path: str) -> InputError:
    """Return what the site is told when ``path`` cannot be opened; raises ``failure`` itself where the machine is at fault."""
    if failure.errno not in _FAULTS_OF_THE_FILE:
        raise failure
    if failure.errno in {errno.ELOOP, errno.ENOTDIR, errno.ENXIO, errno.EISDIR}:
        return not_a_file(path)
    if failure.errno == errno.ENOENT:
        problem = "was there and is gone, or never was"
        return InputError(problem, file=shown(path), remedy="Look at its name, or send it again.")
    problem = f"cannot be read: {os.strerror(failure.errno or 0).lower()}"
    return InputError(problem, file=shown(path), remedy="Send it again with read permission.")


def not_a_file(path: str) -> InputError:
    """Return the refusal of anything that is no regular file in a real folder."""
    problem = "is a link, a pipe, a device or another thing that is no regular file"
    return InputError(problem, file=shown(path), remedy="Send the file itself.")


def shown(name: str) -> str:
    """Return a file name as text that can be stored and printed: bytes that are no UTF-8 and control characters become escapes."""
    doubled = name.replace("\\", "\\\\")
    text = doubled.encode("utf-8", "surrogateescape").decode("utf-8", "backslashreplace")
    return "".join(character if character.isprintable() else character.encode("unicode_escape").decode() for character in text)
