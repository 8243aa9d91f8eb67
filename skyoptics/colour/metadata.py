"""What a picture says about itself, and what it must not say: folders, the user's name, the computer's name."""

from __future__ import annotations

import contextlib
import getpass
import json
import os
import re
import shlex
import socket
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path, PurePosixPath, PureWindowsPath

from skyoptics.errors import DomainError

WRITTEN_BY_HAND = ("Title", "Description", "Author", "Copyright", "Comment")
"""Entries that a person words on purpose: a name in them stays, folders are still cut."""

_COMMON = frozenset({"root", "user", "admin", "ubuntu", "debian", "runner", "guest", "home", "localhost", "local"})
"""Login and host names that point to nobody; taking them out would only spoil texts."""
_HIDDEN = "(hidden)"

# A folder begins a word; "W m⁻²/sr", "1/2" and "https://a.org/b" hold none.
_POSIX = re.compile(
    r"(?:file:/+|(?<![\w./:~-])//+|(?<![\w./~-])/(?!/)|(?<![\w./])~[\w.-]*/)(?=[\w.@~-])[^\s'\"<>|;,)\]}]+"
)
_WINDOWS = re.compile(r"(?:(?<!\w)[A-Za-z]:[\\/](?!/)|\\\\(?=\w))[^\s'\"<>|;,)\]}]*")
_MAILBOX = re.compile(r"\b[\w.+-]+@[\w-]+(?:\.[\w-]+)*")


def picture_metadata(
    *,
    software: str,
    version: str,
    title: str | None = None,
    description: str | None = None,
    scene_hash: str | None = None,
    seed: int | None = None,
    command: Sequence[str] | None = None,
    more: Mapping[str, object] | None = None,
) -> dict[str, str]:
    """Return the text entries of an image file, free of private matter.

    Parameters
    ----------
    software, version : str
        Joined into ``Software``.
    title, description : str, optional
        ``Title`` and ``Description``.
    scene_hash : str, optional
        ``Scene hash``.
    seed : int, optional
        ``Seed``.
    command : sequence of str, optional
        The command's words, made into one ``Command`` that a shell would read the same way.
    more : mapping, optional
        Further entries: name → text, or anything `str` or JSON can word (mappings and lists become JSON).

    Returns
    -------
    dict of str to str
        In this order; absolute paths are cut to their last part, login and host name are hidden.
    """
    entries: dict[str, object] = {"Title": title, "Description": description, "Software": f"{software} {version}"}
    entries |= {"Scene hash": scene_hash, "Seed": seed}
    if command is not None:
        entries["Command"] = shlex.join(_bare_word(word) for word in command)
    entries |= dict(more or {})
    names = private_names()
    result = {}
    for key, value in entries.items():
        if value is not None:
            text = value if isinstance(value, str) else json.dumps(value, ensure_ascii=False, default=str)
            result[key] = strip_private(text, () if key in WRITTEN_BY_HAND else names)
    return result


def private_names() -> tuple[str, ...]:
    """Return the login and host names of this computer, the longer first, without those that are everybody's."""
    found = {socket.gethostname(), socket.gethostname().split(".")[0], Path.home().name}
    found |= {os.environ.get(key, "") for key in ("USER", "LOGNAME", "USERNAME")}
    with contextlib.suppress(OSError, KeyError, ImportError):  # no login name at all, as in some containers
        found.add(getpass.getuser())
    return tuple(
        sorted((name for name in found if len(name) > 2 and name.lower() not in _COMMON), key=lambda x: (-len(x), x))
    )


def strip_private(text: str, names: Iterable[str] = ()) -> str:
    """Return a text without folders, mail-like addresses and the given names.

    Parameters
    ----------
    text : str
        Any text.
    names : iterable of str
        Whole words to hide, in any case of letters.

    Returns
    -------
    str
        An absolute path is cut to its last part; an address and a name become ``(hidden)``.
    """
    for folder in _known_folders():
        text = re.sub(rf"(?<![\w./\\-]){re.escape(folder)}(?:[/\\](?=[^\s'\"])|(?=[\s'\",;)]|$))", "", text)
    text = _WINDOWS.sub(lambda match: PureWindowsPath(match[0]).name, text)
    text = _POSIX.sub(lambda match: PurePosixPath(match[0]).name, text)
    text = _MAILBOX.sub(_HIDDEN, text)
    for name in names:
        text = re.sub(rf"(?<!\w){re.escape(name)}(?!\w)", _HIDDEN, text, flags=re.IGNORECASE)
    return text


def refuse_private(entries: Mapping[str, str]) -> None:
    """Check that no entry holds a folder or, where no person worded it, a login or host name.

    Parameters
    ----------
    entries : mapping of str to str
        As made by `picture_metadata`.

    Raises
    ------
    DomainError
        Naming the entries.
    """
    names = private_names()
    guilty = [
        key for key, text in entries.items() if strip_private(text, () if key in WRITTEN_BY_HAND else names) != text
    ]
    if guilty:
        raise DomainError(f"{', '.join(guilty)}: holds an absolute path or a login or host name; use relative paths")


def to_json(entries: Mapping[str, str]) -> str:
    """Return the entries as JSON text, in their order, two spaces of indent, ending in a line break."""
    return json.dumps(dict(entries), ensure_ascii=False, indent=2) + "\n"


def _bare_word(word: str) -> str:
    """Return one word of a command with an absolute path cut to its last part, spaces in it and all."""
    head, sign, tail = word.rpartition("=")
    if PureWindowsPath(tail).is_absolute():
        return head + sign + PureWindowsPath(tail).name
    if PurePosixPath(tail).is_absolute() or tail.startswith("~"):
        return head + sign + PurePosixPath(tail).name
    return word


def _known_folders() -> list[str]:
    """Return working and home folder, the longer first: they may hold spaces, which no pattern can follow."""
    found = {str(Path.cwd()), str(Path.home())}
    return sorted((folder for folder in found if len(folder) > 1), key=len, reverse=True)
