"""A set of files in one folder, replaced whole or not at all.

    claim ──▶ mend what a killed run left ──▶ .coming  the new files, synced     (nothing in force yet)
                                         ──▶ .kept    the old files and a journal (replacement has begun)
                                         ──▶ rename file by file, the index last  ──▶ drop .kept

The index (`summary.json`) holds the SHA-256 of every other file, so a mixture can never pass for a whole set.
Whatever the instant at which a run dies, the next claim finds `.kept` and puts the old set back, or finds the new one
complete. By the same hashes a file is known as ours: one that somebody else made or changed is never replaced.
Needs a POSIX file system: rename replaces atomically, a record lock ends with its process.
"""

import fcntl
import hashlib
import json
import os
import re
import shutil
import stat
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path

from planner.errors import InputError, MachineError
from planner.export.plain_files import digest_of, machine_faults, read_plain, sync_folder, write_new

INDEX = "summary.json"
RUN_LOG = "run_log.json"
LOCK, COMING, KEEPING, KEPT, DONE = ".lock", ".coming", ".keeping", ".kept", ".done"
JOURNAL = ".journal"
SHA256 = re.compile("[0-9a-f]{64}")
_claimed_here: set[tuple[int, int]] = set()  # a record lock does not hold off a second claim of the same process


def json_bytes(content: Mapping) -> bytes:
    """Canonical JSON: the order of `content`, UTF-8, two spaces, a final newline. ValueError for NaN and infinity."""
    return (json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False, default=_plain_number) + "\n").encode()


def verify_set(folder, index: str = INDEX) -> tuple[str, ...]:
    """Why the set that `index` describes is not whole; empty when it is whole."""
    folder = Path(folder)
    try:
        listed = _listed(folder, index)
    except OSError as fault:
        return (f"{folder / index}: cannot be read: {fault.strerror}",)
    except ValueError as fault:
        return (f"{folder / index}: {fault}",)
    return tuple(f"{folder / name}: {why}" for name, digest in listed.items() if (why := _fault(folder / name, digest)))


def check_ours(folder, index: str = INDEX, coming: Iterable[str] = ()) -> None:
    """Refuse to replace what this tool did not write, or what was changed since: nobody's file is lost.

    `coming` names the new files, as far as they are known. Says nothing while a run holds the folder or has left it
    half-way: who claims it mends that first, and its writing asks anew.

    Raises
    ------
    InputError : `index` is not one of ours, a file that it lists was changed, or one of `coming` is not of its set
    """
    folder = Path(folder)
    faults = tuple(_not_ours(folder, index, coming))
    if faults and not any(os.path.lexists(folder / name) for name in (LOCK, KEPT)):
        raise InputError(*faults)


@contextmanager
def claim_folder(folder):
    """Hold `folder` for one run; whatever an earlier run left unfinished is mended first.

    Yields a `ClaimedFolder`; its `mended` tells what was mended. The folder and those above it are made if missing, and
    removed again if the run puts nothing into them.

    Raises
    ------
    MachineError : another run holds the folder, or the machine does not let us write
    InputError : the path, or something in it that would be replaced, is not what it has to be (a link, a folder)
    """
    folder = Path(folder)
    with _tidied(folder):
        with machine_faults(folder, "nothing was written"):
            if folder.is_symlink() or (folder.exists() and not folder.is_dir()):
                raise InputError(f"{folder}: must be a folder of its own (links are not followed for output)")
            folder.mkdir(parents=True, exist_ok=True)
            lock = _lock(folder)
        try:
            with machine_faults(folder, "an interrupted run could not be mended"):
                mended = _mend(folder)
            yield ClaimedFolder(folder, mended)
        finally:
            _unlock(folder, lock)


def write_set(folder, files: Mapping[str, bytes], summary: Mapping, **options) -> tuple[str, ...]:
    """Claim `folder`, write one set into it, let go. Returns what had to be mended first."""
    with claim_folder(folder) as claimed:
        claimed.write(files, summary, **options)
    return claimed.mended


def write_file(path, content: bytes) -> None:
    """Write one file of its own, whole or not at all: a temporary file beside it, then replace.

    Raises
    ------
    MachineError : the machine does not let us write; what was there is kept
    InputError : the path is a folder, a link, or not a plain file
    """
    path = Path(path)
    if not path.name or path.is_symlink() or (path.exists() and not path.is_file()):
        raise InputError(f"{path}: must be a plain file or a new name (links are not followed for output)")
    coming = path.with_name(f".{path.name}.{os.getpid()}")
    with machine_faults(path, "nothing was written"):
        try:
            write_new(coming, content)
            os.replace(coming, path)
        finally:
            coming.unlink(missing_ok=True)


class ClaimedFolder:
    """A folder held by this run. `mended`: one line for each thing that an earlier, interrupted run had left."""

    def __init__(self, path: Path, mended: tuple[str, ...]):
        self.path, self.mended = path, mended

    def write(
        self, files: Mapping[str, bytes], summary: Mapping, *, index: str = INDEX, run_log: Mapping | None = None
    ):
        """Replace the set that `index` describes by `files`, in one step as seen from outside.

        `index` becomes `summary` with `files` added: the SHA-256 of each. `run_log` goes to run_log.json, outside the
        hashes. Files that only the old set had are removed. Raises MachineError, and then the old set is in place;
        InputError as `check_ours` does, before anything is replaced.
        """
        digests = {name: hashlib.sha256(content).hexdigest() for name, content in sorted(files.items())}
        log = {} if run_log is None else {RUN_LOG: json_bytes(run_log)}
        coming = {**files, **log, index: json_bytes({**summary, "files": digests})}
        if {RUN_LOG, index} & set(files):
            raise ValueError(f"{index} and {RUN_LOG} are made here, got them among the files")
        for name in coming:
            _check_target(self.path, name)
        if faults := tuple(_not_ours(self.path, index, coming)):
            raise InputError(*faults)
        with machine_faults(self.path, "the set that was there is kept"):
            try:
                _replace(self.path, coming, index)
            except BaseException:  # Ctrl-C too
                _mend(self.path)
                raise
        with suppress(OSError):  # the new set is in place; what cannot be tidied now, the next claim mends
            os.rename(self.path / KEPT, self.path / DONE)
            _clear(self.path)


def _replace(folder: Path, coming: Mapping[str, bytes], index: str) -> None:
    (folder / COMING).mkdir()
    for name, content in coming.items():
        write_new(folder / COMING / name, content)
    listed = _listed(folder, index) if os.path.lexists(folder / index) else {}
    old = [name for name in sorted({*coming, *listed}) if os.path.lexists(folder / name)]
    _keep_aside(folder, old, coming, index)
    for name in coming:  # the index is the last of them
        os.replace(folder / COMING / name, folder / name)
    _remove_all(folder, set(old) - set(coming))
    sync_folder(folder)


def _keep_aside(folder: Path, old: list[str], coming: Mapping[str, bytes], index: str) -> None:
    """After this, `.kept` holds what is needed to undo the replacement; it comes into being by one rename."""
    keeping = folder / KEEPING
    keeping.mkdir()
    for name in old:
        _check_target(folder, name)
        try:
            os.link(folder / name, keeping / name)
        except OSError:  # the file system knows no hard links
            write_new(keeping / name, read_plain(folder / name))
    digest = hashlib.sha256(coming[index]).hexdigest()
    write_new(keeping / JOURNAL, json_bytes({"index": index, "sha256": digest, "old": old, "new": list(coming)}))
    sync_folder(keeping)
    os.rename(keeping, folder / KEPT)
    sync_folder(folder)


def _mend(folder: Path) -> tuple[str, ...]:
    """Bring the folder to a whole set from whatever state a run left it in. Can itself be interrupted and run again."""
    told: tuple[str, ...] = ()
    if (folder / KEPT).is_dir():
        index, digest, old, new = _journal(folder / KEPT / JOURNAL)
        if not verify_set(folder, index) and digest_of(folder / index) == digest:
            _remove_all(folder, set(old) - set(new))
            told = (
                f"{folder}: an earlier run ended just after it replaced the set; the new set is whole and in place",
            )
        else:
            _remove_all(folder, set(new) - set(old))
            for name in sorted(old, key=lambda name: name == index):
                with suppress(FileNotFoundError):  # put back by a mending that was interrupted
                    os.replace(folder / KEPT / name, folder / name)
            told = (
                f"{folder}: an earlier run was interrupted while it replaced the set; the set before is back in place",
            )
        sync_folder(folder)
        os.rename(folder / KEPT, folder / DONE)
    elif (folder / COMING).exists() or (folder / KEEPING).exists():
        told = (
            f"{folder}: an earlier run was interrupted before it replaced anything; its unfinished files are removed",
        )
    _clear(folder)
    return told


def _journal(path: Path) -> tuple[str, str, list[str], list[str]]:
    try:
        if path.parent.is_symlink():
            raise ValueError("a link to somewhere else")
        journal = json.loads(read_plain(path))
        index, digest, old, new = (journal[key] for key in ("index", "sha256", "old", "new"))
        if all(_is_plain(name) for name in [index, *old, *new]):
            return index, digest, old, new
    except (OSError, ValueError, KeyError, TypeError, RecursionError):
        pass
    raise MachineError(f"{path}: is not what this tool writes; save what you need from {path.parent}, then remove it")


def _clear(folder: Path) -> None:
    for name in (DONE, KEEPING, COMING):
        if (folder / name).is_symlink():
            (folder / name).unlink()
        elif (folder / name).exists():
            shutil.rmtree(folder / name)


def _remove_all(folder: Path, names) -> None:
    for name in names:
        (folder / name).unlink(missing_ok=True)


def _listed(folder: Path, index: str) -> dict[str, str]:
    """The SHA-256 of each file of the set that is there. ValueError with the rule where the index is none of ours."""
    try:
        content = json.loads(read_plain(folder / index))
        listed = content["files"]
        if (listed or "mission" in content) and all(_is_plain(n) and SHA256.fullmatch(d) for n, d in listed.items()):
            return listed
    except (ValueError, KeyError, TypeError, AttributeError, RecursionError):
        pass
    raise ValueError("files must be a table of file names and their SHA-256")


def _not_ours(folder: Path, index: str, coming: Iterable[str]) -> Iterator[str]:
    """Each file that may not be replaced or removed, with the reason and the mend."""
    mend = "move it elsewhere, or choose another folder"
    listed: dict[str, str] = {}
    known = set()
    if os.path.lexists(folder / index):
        try:
            listed = _listed(folder, index)
            known = {*listed, index, RUN_LOG}
        except (OSError, ValueError) as fault:
            why = fault.strerror if isinstance(fault, OSError) else fault
            yield f"{folder / index}: is not what this tool writes ({why}); {mend}"
            return
    for name, digest in listed.items():
        if os.path.lexists(folder / name) and (why := _fault(folder / name, digest)):
            yield f"{folder / name}: was not written by this tool or was changed since ({why}); {mend}"
    for name in coming:
        if name not in known and os.path.lexists(folder / name):
            yield f"{folder / name}: is not of the set that {index} lists and would be overwritten; {mend}"


def _is_plain(name) -> bool:
    return isinstance(name, str) and name == os.path.basename(name) != "" and name[0] != "." and name.isprintable()


def _check_target(folder: Path, name: str) -> None:
    if not _is_plain(name):
        raise ValueError(f"a set holds plain visible file names, got {name!r}")
    with suppress(FileNotFoundError):
        if not stat.S_ISREG((folder / name).lstat().st_mode):
            raise InputError(
                f"{folder / name}: stands where a file is to be written and is not a plain file; remove it first"
            )


def _fault(path: Path, digest: str) -> str | None:
    try:
        return None if digest_of(path) == digest else "differs from the hash in the index"
    except FileNotFoundError:
        return "is missing"
    except OSError as fault:
        return f"cannot be read: {fault.strerror}"


def _lock(folder: Path) -> int:
    """The descriptor of the lock file, which says who holds it. The kernel frees the lock of a process that died."""
    identity = (folder.stat().st_dev, folder.stat().st_ino)
    if identity in _claimed_here:  # asked before opening: closing any handle on the file would drop the lock
        raise _held(folder, os.getpid())
    while True:
        handle = os.open(folder / LOCK, os.O_RDWR | os.O_CREAT | os.O_NOFOLLOW | os.O_NONBLOCK, 0o666)
        try:
            fcntl.lockf(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except (BlockingIOError, PermissionError):
            holder = os.read(handle, 20).decode(errors="replace").strip() or "unknown"
            os.close(handle)
            raise _held(folder, holder) from None
        with suppress(FileNotFoundError):
            if os.path.samestat(os.fstat(handle), os.stat(folder / LOCK, follow_symlinks=False)):
                break
        os.close(handle)  # its last holder removed the file between our opening and our locking it
    _claimed_here.add(identity)
    try:
        os.ftruncate(handle, 0)
        os.write(handle, f"{os.getpid()}\n".encode())
    except BaseException:
        _unlock(folder, handle)
        raise
    return handle


def _held(folder: Path, holder) -> MachineError:
    return MachineError(
        f"{folder}: another run (process {holder}) is writing here; wait for it or choose another folder"
    )


def _unlock(folder: Path, handle: int) -> None:
    with suppress(FileNotFoundError):
        _claimed_here.discard((folder.stat().st_dev, folder.stat().st_ino))
    with suppress(OSError):
        (folder / LOCK).unlink()
    os.close(handle)


@contextmanager
def _tidied(folder: Path) -> Iterator[None]:
    """Of the folder and those above it, the ones that were missing are removed at the end where they are empty."""
    missing = [path for path in (folder, *folder.parents) if not os.path.lexists(path)]
    try:
        yield
    finally:
        for path in missing:
            with suppress(OSError):  # not empty: a set was written
                path.rmdir()


def _plain_number(value):
    """numpy scalars, for json."""
    if hasattr(value, "item"):
        return value.item()
    raise TypeError(f"{type(value).__name__} cannot be written as JSON")
