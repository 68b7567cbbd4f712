"""One night at a time on one rig: a running night claims its instruments on this computer.

A claim is a locked file in the computer's folder for temporary files, named after the address. The
operating system lets go of it when the night's process ends, however it ends. It is no protection
against a night that runs on another computer.
"""

import hashlib
import os
import sys
import tempfile
from collections.abc import Callable, Iterator, Mapping
from contextlib import ExitStack, contextmanager
from pathlib import Path

from orchestrator.cli.failing import Failed

_SHARED = 0o666  # any person of this computer may have run the night before
_FAR = 1 << 20  # the byte that is locked on Windows, beyond the text, which stays readable


@contextmanager
def claimed(addresses: Mapping[str, str]) -> Iterator[Callable[[str], None]]:
    """Claim instruments for as long as the context lasts.

    Parameters
    ----------
    addresses : mapping of str to str
        The VISA address of each instrument, by its name.

    Yields
    ------
    Callable[[str], None]
        To be told which night it is, for the message that another night gets.

    Raises
    ------
    Failed
        Another night has one of the instruments, or no claim can be made.
    """
    with ExitStack() as stack:
        held = [stack.enter_context(_locked(name, address)) for name, address in addresses.items()]

        def tell(night: str) -> None:
            for number in held:
                _write(number, f"{night}, process {os.getpid()}")

        tell("a night that is being started")
        yield tell


def claim_file(address: str) -> Path:
    """The file that stands for an address; board 0 may be written with or without its number."""
    spelt = address.strip().upper()
    kind, _, rest = spelt.partition("::")
    same = f"{kind if kind[-1:].isdigit() else kind + '0'}::{rest}"
    name = hashlib.sha256(same.encode()).hexdigest()[:20]
    return Path(tempfile.gettempdir(), f"nightfield-{name}.claim")


@contextmanager
def _locked(name: str, address: str) -> Iterator[int]:
    file = claim_file(address)
    try:
        number = _open(file)
    except OSError as error:
        raise Failed(
            f"{file}: cannot be opened, so that another night on {name} at {address} would not be "
            f"noticed: {error.strerror}"
        ) from error
    try:
        if not _lock(number):
            raise Failed(
                f"{name} at {address} is in use by {_read(number)}; one night at a time. "
                f"To end that one: nightfield park NIGHT --reason WHY"
            )
        yield number
    finally:
        os.close(number)


def _open(file: Path) -> int:
    try:
        return os.open(file, os.O_RDWR | os.O_CREAT, _SHARED)
    except PermissionError:  # another person's file; it can be locked all the same
        return os.open(file, os.O_RDONLY)


def _lock(number: int) -> bool:
    try:
        if sys.platform == "win32":
            import msvcrt

            os.lseek(number, _FAR, os.SEEK_SET)
            msvcrt.locking(number, msvcrt.LK_NBLCK, 1)
        else:
            import fcntl

            fcntl.flock(number, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        return False
    return True


def _write(number: int, text: str) -> None:
    try:
        os.ftruncate(number, 0)
        os.lseek(number, 0, os.SEEK_SET)
        os.write(number, text.encode())
    except OSError:
        return  # the claim holds without its text


def _read(number: int) -> str:
    try:
        os.lseek(number, 0, os.SEEK_SET)
        return os.read(number, 1000).decode("utf-8", "replace") or "another night"
    except OSError:
        return "another night"
