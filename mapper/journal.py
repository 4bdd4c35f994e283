"""Finished blocks on disk: each appears whole or not at all, so that a killed run goes on."""

from __future__ import annotations

import json
import os
import shutil
import socket
import threading
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from mapper.errors import RunFolderError

WORK = ".work"
MOST_NAMED = 12  # of the things that changed, in a message


@dataclass(frozen=True)
class Journal:
    """The work folder of a run."""

    folder: Path

    @property
    def blocks(self) -> Path:
        """Where finished blocks lie."""
        return self.folder / "blocks"

    def block(self, index: int) -> Path:
        """The file of one block."""
        return self.blocks / f"{index:07d}.npz"

    def is_done(self, index: int) -> bool:
        """Whether a block was finished."""
        return self.block(index).exists()

    def save(self, index: int, arrays: Mapping[str, NDArray[Any]]) -> None:
        """Write one block under a temporary name and rename it."""
        final = self.block(index)
        temporary = final.with_name(
            f".{socket.gethostname()}-{os.getpid()}-{threading.get_ident()}-{final.name}"
        )
        try:
            with temporary.open("wb") as stream:
                np.savez(stream, allow_pickle=False, **arrays)
            temporary.replace(final)
        except OSError as cause:
            temporary.unlink(missing_ok=True)
            raise RunFolderError(
                f"block {index} cannot be written: {cause.strerror or cause}",
                where=str(self.blocks),
                fix="make room and run the same command again: finished blocks are kept",
            ) from cause

    def load(self, index: int, name: str) -> NDArray[Any]:
        """Read one array of a finished block."""
        with np.load(self.block(index), allow_pickle=False) as arrays:
            return np.asarray(arrays[name])

    def clear(self) -> None:
        """Remove the work folder."""
        shutil.rmtree(self.folder, ignore_errors=True)


def open_journal(folder: Path, fingerprint: Mapping[str, Any], *, fresh: bool) -> Journal:
    """Open the work folder of a run, or begin one.

    Raises
    ------
    RunFolderError where the folder holds blocks of another job, or cannot be written.
    """
    journal = Journal(folder / WORK)
    note = journal.folder / "fingerprint.json"
    if fresh:
        journal.clear()
    try:
        if note.exists():
            _refuse_changes(_read_note(note, folder), fingerprint, folder)
        journal.blocks.mkdir(parents=True, exist_ok=True)
        temporary = note.with_name(f".{note.name}")
        temporary.write_text(json.dumps(fingerprint, indent=1), encoding="utf-8")
        temporary.replace(note)
    except RunFolderError:
        raise
    except OSError as cause:
        raise RunFolderError(
            f"the run folder cannot be written: {cause.strerror or cause}",
            where=str(folder),
            fix="--out DIR with a folder that may be written",
        ) from cause
    return journal


def _read_note(note: Path, folder: Path) -> dict[str, Any]:
    try:
        found: dict[str, Any] = json.loads(note.read_text(encoding="utf-8"))
    except ValueError as cause:
        raise RunFolderError(
            "the note of the unfinished run cannot be read",
            where=str(folder),
            fix="--fresh to start over, or --out DIR for another folder",
        ) from cause
    return found


def _refuse_changes(old: Mapping[str, Any], new: Mapping[str, Any], folder: Path) -> None:
    changed = sorted(key for key in {*old, *new} if old.get(key) != new.get(key))
    if changed:
        raise RunFolderError(
            "the folder holds an unfinished run of another job; changed since: "
            + ", ".join(changed[:MOST_NAMED])
            + (f" and {len(changed) - MOST_NAMED} more" if len(changed) > MOST_NAMED else ""),
            where=str(folder),
            fix="--fresh to start over, or --out DIR for another folder",
        )


class locked:  # noqa: N801 - reads as a word in a with statement
    """One run at a time in a folder; a lock left by a process that died does not count."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.path = folder / ".lock"

    def __enter__(self) -> None:
        try:
            self.folder.mkdir(parents=True, exist_ok=True)
            self._refuse_living()
            self.path.write_text(str(os.getpid()), encoding="utf-8")
        except RunFolderError:
            raise
        except OSError as cause:
            raise RunFolderError(
                f"the run folder cannot be written: {cause.strerror or cause}",
                where=str(self.folder),
                fix="--out DIR with a folder that may be written",
            ) from cause

    def _refuse_living(self) -> None:
        if not self.path.exists():
            return
        text = self.path.read_text(encoding="utf-8").strip()
        if text.isdigit() and int(text) != os.getpid() and _lives(int(text)):
            raise RunFolderError(
                f"another run (process {text}) is writing to this folder",
                where=str(self.folder),
                fix="wait for it, or --out DIR for another folder",
            )

    def __exit__(self, *_: object) -> None:
        self.path.unlink(missing_ok=True)


def _lives(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    return True
