"""From the TOML to a study, or to the list of everything that is wrong with it."""

from __future__ import annotations

import os
import tomllib
from pathlib import Path

from pydantic import ValidationError

from reweight.errors import StudyError
from reweight.study.patterns import expanded
from reweight.study.problems import Problem, disagreements, not_built_yet, translated, unanswered
from reweight.study.schema import Study

__all__ = ["load_study", "parse_study"]

_LARGEST_TEXT = 4_000_000  # characters; a study of a thousand runs has a hundred thousand


def load_study(path: str | os.PathLike[str]) -> Study:
    """Read a study file.

    Parameters
    ----------
    path : path
        A TOML file; the data files it names are relative to its folder.

    Returns
    -------
    Study

    Raises
    ------
    StudyError
        The file cannot be read or is no study; the message lists every problem.
    """
    source = Path(path)
    try:
        with source.open("rb") as stream:
            raw = stream.read(_LARGEST_TEXT + 1)
        text = raw.decode("utf-8-sig")
    except OSError as error:
        raise StudyError(
            f"study file {str(source)!r} must be readable; the system says: {error.strerror or error}."
        ) from error
    except UnicodeDecodeError as error:
        line = error.object[: error.start].count(b"\n") + 1
        raise StudyError(
            f"study file {str(source)!r} must be UTF-8 text; got byte 0x{error.object[error.start]:02x} "
            f"(line {line}). Save it as UTF-8; if it is a combined file, it is ready to be asked: reweight show FILE."
        ) from error
    return _parse(text, folder=source.parent, path=source)


def parse_study(text: str, *, folder: str | os.PathLike[str]) -> Study:
    """Read a study from the text of a study file.

    Parameters
    ----------
    text : str
        TOML.
    folder : path
        Folder to which the data files' names are relative.

    Returns
    -------
    Study

    Raises
    ------
    StudyError
        The text is no study; the message lists every problem.
    """
    return _parse(text, folder=Path(folder), path=None)


def _parse(text: str, *, folder: Path, path: Path | None) -> Study:
    name = "study" if path is None else f"study file {str(path)!r}"
    if len(text) > _LARGEST_TEXT:
        raise StudyError(f"{name} must not be longer than {_LARGEST_TEXT} characters; is it a data file?")
    try:
        values = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise StudyError(f"{name} must be TOML; {error}. Correct that line.") from error
    except RecursionError:
        raise StudyError(f"{name} must not nest tables and lists this deeply.") from None
    values, matched = expanded(values, folder)
    study = None
    problems = [*unanswered(values), *not_built_yet(values)]
    try:
        study = Study.model_validate(values)
    except ValidationError as error:
        problems += translated(error.errors(), values)
    else:
        study._text = text
        study._folder = folder
        study._path = path
        study._matched = matched
        study._says_temperature_unit = "temperature_unit" in values
        problems += disagreements(study, values)
    if study is None or problems:
        raise StudyError(_listed(name, problems), key=problems[0].key)
    return study


def _listed(name: str, problems: list[Problem]) -> str:
    if len(problems) == 1:
        return f"{name}: {problems[0].sentence}"
    return "\n  ".join([f"{name} has {len(problems)} problems:", *(each.sentence for each in problems)])
