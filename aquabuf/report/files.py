"""Output that appears whole or not at all, and never over an earlier result unless asked."""

from __future__ import annotations

import hashlib
import os
import tempfile
from collections.abc import Iterable
from pathlib import Path
from types import TracebackType

from aquabuf.errors import FileError

__all__ = ["OutputFolder", "sha256"]


class OutputFolder:
    """Write files under temporary names in `folder` and give them their names once all are complete.

    As a context manager: leaving without an error publishes the files, leaving with one removes them. Files named in
    `names` (where * stands for anything) that exist already are refused unless `force`; with `force`, those not written
    again are removed, so that a folder never mixes two runs. What a failed run left (exactly the `leftovers`) gives way
    without `force`.
    """

    def __init__(self, folder: Path, names: Iterable[str], *, force: bool, leftovers: Iterable[str] = ()):
        self._leftovers = set(leftovers)
        self.folder = folder
        self._names = tuple(names)
        self._force = force
        self._parts: dict[str, Path] = {}
        self._was_there = True

    def __enter__(self) -> OutputFolder:
        self._was_there = self.folder.exists()
        try:
            self.folder.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise FileError(f"the folder {self.folder.name!r} cannot be made: {_why(error)}. "
                            f"Choose another with --out.") from None
        for name in self._there():
            if (self.folder / name).is_dir():
                raise FileError(f"{self.folder.name}/{name} is a folder, where a file is to be written. "
                                f"Choose another folder with --out.")
        there = self._there()
        if there and not self._force and set(there) != self._leftovers:
            raise FileError(f"{self.folder.name}/{there[0]} exists already and is not overwritten. "
                            f"Choose another folder with --out, or replace it with --force.")
        return self

    def _there(self) -> list[str]:
        """Files of this kind of run that are in the folder."""
        return [path.name for name in self._names for path in sorted(self.folder.glob(name))]

    def part(self, name: str) -> Path:
        """Temporary path to write the file `name` to. Raises FileError where the folder cannot be written."""
        if name not in self._parts:
            try:
                handle, path = tempfile.mkstemp(prefix=f".{name}.", suffix=".part", dir=self.folder)
            except OSError as error:
                raise FileError(f"the folder {self.folder.name!r} cannot be written to: {_why(error)}. "
                                f"Choose another with --out.") from None
            os.close(handle)
            umask = os.umask(0)
            os.umask(umask)
            os.chmod(path, 0o666 & ~umask)  # the usual permissions, which mkstemp narrows
            self._parts[name] = Path(path)
        return self._parts[name]

    @property
    def written(self) -> frozenset[str]:
        """Names of the files that will be published."""
        return frozenset(self._parts)

    def drop(self, name: str) -> None:
        """Forget a file that turned out to have nothing to say."""
        if name in self._parts:
            self._parts.pop(name).unlink(missing_ok=True)

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        if kind is not None:
            for path in self._parts.values():
                path.unlink(missing_ok=True)
            if not self._was_there and not any(self.folder.iterdir()):
                self.folder.rmdir()
            return
        try:
            for name in self._there():
                if name not in self._parts:
                    (self.folder / name).unlink(missing_ok=True)
            for name, path in self._parts.items():
                os.replace(path, self.folder / name)
        except OSError as problem:
            for path in self._parts.values():
                path.unlink(missing_ok=True)
            raise FileError(f"results could not be put into {self.folder.name!r}: {_why(problem)}. Files there may be "
                            f"of this run and of an earlier one; choose another folder with --out.") from None


def _why(error: OSError) -> str:
    return (error.strerror or "unknown reason").lower()


def sha256(path: Path) -> str:
    """Hash of a file. Raises FileError where it cannot be read."""
    if path.is_dir():
        raise FileError(f"{path.name} is a folder; a file is needed. Name the file in it.")
    try:
        with path.open("rb") as stream:
            return hashlib.file_digest(stream, "sha256").hexdigest()
    except OSError as error:
        raise FileError(f"{path.name} cannot be read: {(error.strerror or 'unknown reason').lower()}. "
                        f"Check the path and its permissions.") from None
