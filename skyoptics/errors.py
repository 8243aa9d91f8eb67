"""Exceptions.

::

    SkyopticsError                what a user can put right; exit code 1
    ├── SceneError                faults in scene files and overrides, all of them at once
    ├── DomainError               physics outside the range where the model holds
    ├── DataFileError             a table, spectrum or image file that cannot be used
    ├── ResumeError               stored work that does not fit the job
    ├── ResourceError             memory, disk or a folder that is not there or not ours
    └── NothingFoundError         a name that is not there; exit code 3

Every text says what was given, what is allowed and what to do next.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from difflib import get_close_matches


class SkyopticsError(Exception):
    """Base of everything skyoptics raises on purpose."""


@dataclass(frozen=True)
class Fault:
    """One thing wrong with a scene.

    Parameters
    ----------
    where : str
        File name, or ``--set`` for an override.
    line : int or None
        Line in the file, counted from 1.
    key : str
        Dotted path such as ``air.1.radius_um`` (tables of a list counted from 1); empty for the whole file.
    message : str
        What was given, what is allowed, the nearest known name.
    """

    where: str
    line: int | None
    key: str
    message: str

    def __str__(self) -> str:
        """Return ``file:line: key: message``."""
        place = self.where if self.line is None else f"{self.where}:{self.line}"
        return ": ".join(part for part in (place, self.key, self.message) if part)


class SceneError(SkyopticsError):
    """One or more faults in scene files.

    Parameters
    ----------
    faults : sequence of Fault
        All that was found, in file order.
    """

    def __init__(self, faults: Sequence[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class DomainError(SkyopticsError, ValueError):
    """A value outside the range where the physics holds."""


class DataFileError(SkyopticsError):
    """A data file that cannot be used."""


class ResumeError(SkyopticsError):
    """Stored work that does not belong to this job, or cannot be read."""


class ResourceError(SkyopticsError):
    """Memory, disk space or a folder that the job needs and does not have."""


class NothingFoundError(SkyopticsError):
    """What was asked for by name is not there."""


def nearest(name: str, known: Iterable[str]) -> str:
    """Return a hint for a misspelt name.

    Parameters
    ----------
    name : str
        What was given.
    known : iterable of str
        The names that exist.

    Returns
    -------
    str
        ``"; did you mean X?"``, or an empty string where nothing is near.
    """
    match = get_close_matches(name, list(known), n=1, cutoff=0.6)
    return f"; did you mean {match[0]}?" if match else ""
