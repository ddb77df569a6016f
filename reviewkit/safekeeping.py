"""Files that survive a kill, a full disk and a second process: atomic writing, an append-only log, one lock."""

import contextlib
import errno
import hashlib
import json
import os
import re
import secrets
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import BinaryIO

from reviewkit.refusals import NotEstimable, Refusal

_SYNCHRONISED = re.compile(r"cloud|sync|dropbox|drive\b|mobile documents", re.IGNORECASE)
_SYNC_MARKERS = (".stfolder", ".sync", ".sync.ffs_db", ".owncloudsync.log", ".dropbox")
_VERSIONED = (".git", ".hg", ".svn", ".bzr", "_darcs", ".jj", "CVS")
_UNWRITTEN_LOCK_SECONDS = 2.0  # a lock file still empty after that long belongs to a process that was killed


def checksum(content: bytes) -> str:
    """The SHA-256 of `content`, in hexadecimal."""
    return hashlib.sha256(content).hexdigest()


def file_checksum(path: Path) -> str:
    """The SHA-256 of a file, read in pieces."""
    with refusing(path, "read"), path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def write_atomically(path: Path, content: str | bytes) -> None:
    """Write all of `content` or nothing: whoever reads `path` sees the old file or the new one."""
    whole = content.encode() if isinstance(content, str) else content
    beside = path.with_name(f".{path.name}.{secrets.token_hex(4)}")
    with refusing(path, "written"):
        try:
            with beside.open("xb") as file:
                file.write(whole)
                file.flush()
                os.fsync(file.fileno())
            os.replace(beside, path)
        finally:
            beside.unlink(missing_ok=True)


def append_line(path: Path, line: str) -> None:
    """Add one finished line and return only when the disk has it; a torn end left by a kill is cut off first."""
    with refusing(path, "written"), path.open("ab+") as file:
        start = _cut_torn_end(file)
        try:
            file.write(line.encode(errors="replace") + b"\n")
            file.flush()
            os.fsync(file.fileno())
        except OSError:
            with contextlib.suppress(OSError):
                os.truncate(path, start)
            raise


def read_lines(path: Path) -> tuple[str, ...]:
    """The finished lines of a log; none where there is no log yet."""
    if not path.exists():
        return ()
    with refusing(path, "read"):
        content = path.read_bytes()
    try:
        return tuple(content[: _whole_length(content)].decode().split("\n")[:-1])
    except UnicodeDecodeError:
        raise Refusal(path.name, "this is not UTF-8 text", remedy="Bring back a copy of the file") from None


def _cut_torn_end(file: BinaryIO) -> int:
    """Take off what stands behind the last finished line; where the file then ends."""
    size = file.seek(0, os.SEEK_END)
    if size == 0:
        return 0
    file.seek(size - 1)
    if file.read(1) != b"\n":
        file.seek(0)
        size = file.truncate(_whole_length(file.read()))
    file.seek(0, os.SEEK_END)
    return size


def _whole_length(content: bytes) -> int:
    """How many bytes stand in finished lines."""
    return content.rfind(b"\n") + 1


@contextlib.contextmanager
def refusing(path: Path, done: str) -> Iterator[None]:
    """Turn what the operating system says about `path` into one message for people."""
    try:
        yield
    except OSError as problem:
        raise _refusal(path.name, done, problem) from None


def _refusal(name: str, done: str, problem: OSError) -> Refusal:
    match problem.errno:
        case errno.ENOSPC | errno.EDQUOT:
            return NotEstimable(
                name, "the disk is full", remedy="Free some space and repeat; all earlier answers are kept"
            )
        case errno.EROFS:
            return Refusal(
                name, "the place can only be read", remedy="Copy the case folder to a place you can write to"
            )
        case errno.ENOENT:
            return Refusal(name, "there is no such file or folder", remedy="Check the name")
        case errno.EISDIR:
            return Refusal(name, "this is a folder", "a file")
        case errno.ENAMETOOLONG:
            return Refusal(name[:60], "the name is too long", remedy="Choose a shorter one")
        case errno.EACCES | errno.EPERM | errno.EBUSY | errno.ETXTBSY:
            return Refusal(name, f"it cannot be {done}", remedy="Close it in other programs, or change its permissions")
        case _:
            return Refusal(name, f"it cannot be {done} ({os.strerror(problem.errno or 0).lower()})")


def place_warnings(folder: Path) -> tuple[str, ...]:
    """What to say about a place from which confidential files may travel: synchronised or versioned folders."""
    above = [folder, *folder.parents]
    warnings = []
    if any(_SYNCHRONISED.search(each.name) or _holds(each, _SYNC_MARKERS) for each in above):
        warnings.append(
            "This folder seems to be copied to other machines; a manuscript under review should stay on yours."
        )
    if any(_holds(each, _VERSIONED) for each in above):
        warnings.append("This folder lies in a versioned tree; see that the case is not committed with it.")
    return tuple(warnings)


def _holds(folder: Path, names: tuple[str, ...]) -> bool:
    return any(os.path.lexists(folder / name) for name in names)


@contextlib.contextmanager
def locked(path: Path) -> Iterator[None]:
    """Hold the one lock of a case; a lock left by a crash is recognised by its process and set aside."""
    _take(path)
    try:
        yield
    finally:
        with contextlib.suppress(OSError):
            path.unlink()


def _take(path: Path) -> None:
    for _ in range(50):
        if _create(path):
            return
        holder = _holder(path)
        if holder is None:
            continue
        if holder and _alive(holder):
            raise Refusal(
                path.parent.name,
                f"another ReviewKit (process {holder.partition(' ')[0]}) has this case open",
                remedy=f"Finish there first; if it is not running, delete the file `{path.name}` in the case folder",
            )
        if holder or _age(path) > _UNWRITTEN_LOCK_SECONDS:
            _set_aside(path, holder)
        else:
            time.sleep(0.1)
    raise Refusal(
        path.parent.name, "the case cannot be locked", remedy=f"Delete the file `{path.name}` in the case folder"
    )


def _create(path: Path) -> bool:
    """Whether the lock is now ours."""
    with refusing(path.parent, "written"):
        try:
            handle = os.open(path, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o600)
        except FileExistsError:
            return False
        with os.fdopen(handle, "w") as file:
            file.write(f"{os.getpid()} {_start_of(os.getpid())}")
        return True


def _holder(path: Path) -> str | None:
    """Process and its start as the lock names them; None where the lock has gone."""
    try:
        return path.read_text(errors="replace").strip()
    except FileNotFoundError:
        return None
    except OSError:
        return ""


def _set_aside(path: Path, holder: str) -> None:
    """Remove a stale lock; if another process has replaced it meanwhile, give theirs back."""
    aside = path.with_name(f"{path.name}.{secrets.token_hex(4)}")
    with contextlib.suppress(OSError):
        os.rename(path, aside)
        if _holder(aside) != holder and not path.exists():
            os.rename(aside, path)
        aside.unlink(missing_ok=True)


def _age(path: Path) -> float:
    try:
        return time.time() - path.stat().st_mtime
    except OSError:
        return 0.0


def _alive(holder: str) -> bool:
    pid, _, start = holder.partition(" ")
    if not pid.isdecimal():
        return False
    return _process_exists(int(pid)) and (not start or start == _start_of(int(pid)))


def _start_of(pid: int) -> str:
    """When the process began, in the system's own ticks; empty where the system does not tell."""
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[19]
    except (OSError, IndexError):
        return ""


if sys.platform == "win32":  # os.kill(pid, 0) would end the process there

    def _process_exists(pid: int) -> bool:
        import ctypes

        query_limited_information, still_active = 0x1000, 259
        handle = ctypes.windll.kernel32.OpenProcess(query_limited_information, False, pid)
        if not handle:
            return False
        code = ctypes.c_ulong()
        ctypes.windll.kernel32.GetExitCodeProcess(handle, ctypes.byref(code))
        ctypes.windll.kernel32.CloseHandle(handle)
        return code.value == still_active

else:

    def _process_exists(pid: int) -> bool:
        try:
            os.kill(pid, 0)
        except (ProcessLookupError, OverflowError):
            return False
        except PermissionError:
            return True
        return True


def read_json(path: Path) -> object:
    """The content of a JSON file of ours, or a refusal that names it."""
    with refusing(path, "read"):
        content = path.read_bytes()
    try:
        return json.loads(content)
    except ValueError:
        raise Refusal(
            path.name, "this is not readable JSON", remedy="Delete the file and repeat the command that made it"
        ) from None
