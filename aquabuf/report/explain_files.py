"""Find the files that a run was made from, by name and hash, and say what changed where they are not the same."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from aquabuf.assess.sample.titrated import Titrated, titrated_by
from aquabuf.errors import FileError, InputError
from aquabuf.readings.long.shipped import shipped_map, shipped_names
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.files import sha256

__all__ = ["RunFiles", "options_from", "read_record", "titrations_of"]

READINGS = "readings"
SHOWN = 12  # characters of a hash in a message


def read_record(folder: Path) -> dict[str, Any]:
    """The run record of a results folder. Raises FileError where there is none that can be used."""
    path = folder / "run.json"
    if not folder.is_dir():
        raise FileError(f"{folder}: no such folder of results. Name the folder that --out made.")
    try:
        record = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise FileError(f"{folder.name} has no run.json, so it is no folder of results. Name the folder that --out "
                        f"made.") from None
    except (OSError, ValueError):
        raise FileError(f"{folder.name}/run.json cannot be read as a run record. Run the assessment again.") from None
    wanted = {"command", "sha256", "options", "files"}
    lacking = sorted(wanted - set(record)) if isinstance(record, dict) else sorted(wanted)
    if lacking:
        raise FileError(f"{folder.name}/run.json must have {', '.join(sorted(wanted))}; it lacks {', '.join(lacking)}. "
                        f"It is of another version: run the assessment again with --force.")
    return record


@dataclass(frozen=True, slots=True)
class RunFiles:
    """The files of a run: names and hashes by part, the folder of its results, the readings if they were named.

    main : the part that --input names.
    """

    folder: Path
    names: Mapping[str, str]
    hashes: Mapping[str, str]
    given: Path | None = None
    main: str = READINGS

    @classmethod
    def of(cls, folder: Path, record: Mapping[str, Any], given: Path | None = None, main: str = READINGS) -> RunFiles:
        """The files that a run record names. Raises FileError where names or hashes are not whole."""
        names, hashes = record["files"], record["sha256"]
        whole = isinstance(names, dict) and isinstance(hashes, dict) and set(names) == set(hashes) and main in names
        if not whole or not all(isinstance(v, str) for v in (*names.values(), *hashes.values())):
            raise FileError(f"{folder.name}/run.json must name each file with its hash; it does not. Run the "
                            f"assessment again with --force.")
        return cls(folder, names, hashes, given, main)

    def find(self, part: str) -> Path | None:
        """The unchanged file of one part of the run ("readings", "map", ...), None where the run had none.

        Looked for beside the results, in the current folder, in the results and beside the readings named; a map also
        among the shipped ones. Raises FileError where it is not there or not the same.
        """
        if part not in self.names:
            return None
        if part == self.main and self.given is not None:
            return self._same(self.given)
        name = Path(self.names[part]).name
        places = list(dict.fromkeys(path for path in self._places(name) if path.is_file()))
        match = next((path for path in (*places, *self._shipped(part)) if sha256(path) == self.hashes[part]), None)
        if match is not None:
            return match
        remedy = "Name it with --input." if part == self.main else \
            f"Put the {part} file there, or beside the readings and name these with --input."
        if not places:
            raise FileError(f"{name}, the {part} of this run, is neither beside {self.folder.name} nor in the current "
                            f"folder. {remedy}")
        raise self._changed(places[0], part)

    def _places(self, name: str) -> Iterator[Path]:
        yield self.folder.resolve().parent / name
        yield Path.cwd() / name
        yield self.folder.resolve() / name
        if self.given is not None:
            yield self.given.resolve().parent / name

    @staticmethod
    def _shipped(part: str) -> Iterator[Path]:
        if part == "map":
            yield from (shipped_map(name) for name in shipped_names())

    def _same(self, path: Path) -> Path:
        """The readings the user named, if they are those of the run."""
        if not path.exists():
            raise FileError(f"{path}: no such file. Check the name given with --input.")
        if sha256(path) != self.hashes[self.main]:
            raise self._changed(path, self.main)
        return path

    def _changed(self, path: Path, part: str) -> FileError:
        now, then = sha256(path)[:SHOWN], self.hashes[part][:SHOWN]
        return FileError(f"{path.name}, the {part} of this run, has changed since: its sha256 begins with {now}, that "
                         f"of the run with {then}. Give back the file of the run (--input names the readings), or run "
                         f"the assessment again and explain that.")


def options_from(record: Mapping[str, Any], kind: type) -> Any:
    """The options of the run as a record of `kind`. Raises InputError where they are of another version."""
    given = record["options"]
    try:
        return kind(**{name: tuple(v) if isinstance(v, list) else v for name, v in given.items()})
    except (TypeError, AttributeError, InputError) as error:
        raise InputError(f"run.json has options that this version does not know ({error}). Run the assessment again "
                         f"with --force.") from None


def titrations_of(files: RunFiles) -> Titrated | None:
    """The titrations that took part in the run, None where it had none."""
    points = files.find("titration points")
    if points is None:
        return None
    return titrated_by(TitrationFiles(points, files.find("titration samples"), files.find("titration points_map"),
                                      files.find("titration samples_map")))
