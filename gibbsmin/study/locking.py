"""One run at a time in a folder: a lock that the operating system takes back when its process dies.

It holds between processes of one machine, and between machines where the file system carries locks (NFS 4,
SMB, Lustre mounted with flock).
"""

from __future__ import annotations

import contextlib
import os
import socket
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import IO

from gibbsmin.errors import StudyRefusedError

LOCK_FILE = "study.lock"


@contextlib.contextmanager
def folder_lock(folder: Path) -> Iterator[None]:
    """Hold the lock of a folder.

    Raises StudyRefusedError, saying which process holds it, when another one does.
    """
    # Not opened for writing over: until the lock is held, its content belongs to the holder.
    with (folder / LOCK_FILE).open("a+", encoding="utf-8") as stream:
        if not _try_lock(stream):
            stream.seek(0)
            holder = stream.read().strip() or "another process"
            raise StudyRefusedError(
                str(folder),
                f"a study is running in this folder ({holder}); wait for it or choose another folder",
            )
        stream.seek(0)
        stream.truncate()
        stream.write(f"process {os.getpid()} on {socket.gethostname()}\n")
        stream.flush()
        try:
            yield
        finally:
            stream.seek(0)
            stream.truncate()
            _unlock(stream)


if sys.platform == "win32":
    import msvcrt

    _FAR = 1 << 30  # locked on Windows means unreadable, so not the bytes that name the holder

    def _try_lock(stream: IO[str]) -> bool:
        os.lseek(stream.fileno(), _FAR, os.SEEK_SET)
        try:
            msvcrt.locking(stream.fileno(), msvcrt.LK_NBLCK, 1)
        except OSError:
            return False
        return True

    def _unlock(stream: IO[str]) -> None:
        stream.flush()
        os.lseek(stream.fileno(), _FAR, os.SEEK_SET)
        msvcrt.locking(stream.fileno(), msvcrt.LK_UNLCK, 1)

else:
    import fcntl

    def _try_lock(stream: IO[str]) -> bool:
        try:
            fcntl.flock(stream.fileno(), fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            return False
        return True

    def _unlock(stream: IO[str]) -> None:
        stream.flush()
        fcntl.flock(stream.fileno(), fcntl.LOCK_UN)
