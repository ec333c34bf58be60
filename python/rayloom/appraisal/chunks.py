"""Work cut into pieces that any executor can do, and that a stopped job need not do again.

Main function: :func:`run_chunks`. A piece depends on its number alone, so that
results are the same for any number of workers.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import Executor, Future, as_completed
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.blas import one_blas_thread
from rayloom.writing import replacing

Arrays = dict[str, NDArray[Any]]
Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Checkpoints:
    """A folder in which finished pieces are kept.

    Attributes
    ----------
    folder : Path
        Made if missing.
    fingerprint : str
        Names what the pieces belong to; pieces of anything else are not taken up.
    """

    folder: Path
    fingerprint: str

    def load(self, name: str) -> Arrays | None:
        """Return a finished piece, or None if there is none that can be used."""
        path = self._path(name)
        if not path.is_file():
            return None
        try:
            with np.load(path, allow_pickle=False) as stored:
                arrays = {key: stored[key] for key in stored.files}
        except (OSError, ValueError, EOFError):
            return None
        if str(arrays.pop("fingerprint", "")) != self.fingerprint:
            return None
        return arrays

    def store(self, name: str, arrays: Arrays) -> None:
        """Keep a finished piece, whole or not at all.

        Raises
        ------
        FileAccessError
            If it cannot be written.
        """
        path = self._path(name)
        with replacing(path) as temporary, temporary.open("wb") as file:
            np.savez(file, fingerprint=np.array(self.fingerprint), **arrays)  # type: ignore[arg-type]

    def clear(self) -> None:
        """Remove all pieces."""
        for path in self.folder.glob("appraise_*.npz"):
            path.unlink()

    def _path(self, name: str) -> Path:
        return self.folder / f"appraise_{name}.npz"


def run_chunks(
    task: Callable[[int, int], Arrays],
    count: int,
    *,
    size: int,
    name: str,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoints: Checkpoints | None = None,
) -> Arrays:
    """Do items 0 … count − 1 in pieces and join their arrays along the first axis.

    Parameters
    ----------
    task : callable
        Given (start, stop), returns arrays whose first axis has stop − start
        members. Picklable if the executor's workers are processes.
    count, size : int
        Number of items, and of those in one piece.
    name : str
        Names the pieces in the checkpoints.
    executor : Executor, optional
        Does the pieces; they are done here, one after the other, if None.
    progress : callable, optional
        Told (items done, items).
    checkpoints : Checkpoints, optional
        Where finished pieces are kept and taken up again.

    Returns
    -------
    dict of str to array

    Raises
    ------
    FileAccessError
        If a piece cannot be kept.
    """
    spans = [(start, min(start + size, count)) for start in range(0, count, size)]
    found: list[Arrays | None] = [
        checkpoints.load(_piece(name, span)) if checkpoints else None for span in spans
    ]
    done = sum(stop - start for (start, stop), piece in zip(spans, found, strict=True) if piece)
    missing = [number for number, piece in enumerate(found) if piece is None]
    if progress is not None:
        progress(done, count)
    with one_blas_thread():
        for number, piece in _as_done(task, spans, missing, executor):
            found[number] = piece
            if checkpoints is not None:
                checkpoints.store(_piece(name, spans[number]), piece)
            done += spans[number][1] - spans[number][0]
            if progress is not None:
                progress(done, count)
    pieces = [piece for piece in found if piece is not None]
    return {key: np.concatenate([piece[key] for piece in pieces]) for key in pieces[0]}


def _as_done(
    task: Callable[[int, int], Arrays],
    spans: Sequence[tuple[int, int]],
    missing: Sequence[int],
    executor: Executor | None,
) -> Any:
    if executor is None:
        for number in missing:
            yield number, _single_threaded(task, *spans[number])
        return
    numbers: dict[Future[Arrays], int] = {
        executor.submit(_single_threaded, task, *spans[number]): number for number in missing
    }
    try:
        for future in as_completed(numbers):
            yield numbers[future], future.result()
    finally:
        for future in numbers:
            future.cancel()


def _single_threaded(task: Callable[[int, int], Arrays], start: int, stop: int) -> Arrays:
    """Do a piece with one thread of linear algebra, so that its bits depend on nothing else."""
    with one_blas_thread():
        return task(start, stop)


def _piece(name: str, span: tuple[int, int]) -> str:
    return f"{name}_{span[0]}_{span[1]}"
