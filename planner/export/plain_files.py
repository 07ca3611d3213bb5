"""Single plain files and what the operating system refuses: nothing here follows a link or waits for a pipe."""

import hashlib
import os
import stat
from collections.abc import Iterator
from contextlib import contextmanager
from errno import EACCES, EDQUOT, EFBIG, EINVAL, ENOSPC, EPERM, EROFS
from io import BufferedReader
from pathlib import Path

from planner.errors import MachineError

REASONS = {
    ENOSPC: "the disk is full",
    EDQUOT: "the disk quota is used up",
    EFBIG: "the file-size limit is reached",
    EACCES: "no permission to write here",
    EPERM: "no permission to write here",
    EROFS: "the file system is read-only",
}


def digest_of(path: Path) -> str:
    with _opened(path) as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def read_plain(path: Path) -> bytes:
    with _opened(path) as file:
        return file.read()


def _opened(path: Path) -> BufferedReader:
    """A plain file to read. OSError for a link, and for a pipe or device, which could keep us waiting for ever."""
    handle = os.open(path, os.O_RDONLY | os.O_NOFOLLOW | os.O_NONBLOCK)
    if stat.S_ISREG(os.fstat(handle).st_mode):
        return open(handle, "rb")
    os.close(handle)
    raise OSError(EINVAL, "must be a plain file")


def write_new(path: Path, content: bytes) -> None:
    with open(os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_NOFOLLOW, 0o666), "wb") as file:
        file.write(content)
        file.flush()
        os.fsync(file.fileno())


def sync_folder(folder: Path) -> None:
    handle = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


@contextmanager
def machine_faults(folder: Path, consequence: str) -> Iterator[None]:
    """What the operating system refuses, told as a MachineError."""
    try:
        yield
    except OSError as fault:
        reason = REASONS.get(fault.errno or 0, fault.strerror or str(fault))
        raise MachineError(f"{folder}: {reason}; {consequence}") from fault
