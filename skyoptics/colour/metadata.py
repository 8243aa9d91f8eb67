"""What a picture says about itself, and what it must not say: folders, the user's name, the computer's name.

`xmp` words it for programs that read XMP (ISO 16684-1:2019) with Dublin Core, and the alternative text of the IPTC Photo
Metadata Standard 2021.1 (from memory), which screen readers of web pages are given.
"""

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
from xml.sax.saxutils import escape, quoteattr

from skyoptics.errors import DomainError

WRITTEN_BY_HAND = ("Title", "Description", "Author", "Copyright", "Comment", "Caption")
"""Entries that a person words on purpose: a name in them stays, folders are still cut."""
XMP = "XML:com.adobe.xmp"
"""Keyword of the iTXt chunk that holds XMP (XMP specification part 3, PNG)."""

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
    author: str | None = None,
    rights: str | None = None,
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
    author, rights : str, optional
        ``Author`` and ``Copyright``: who made it, and the licence line.
    more : mapping, optional
        Further entries: name → text, or anything `str` or JSON can word (mappings and lists become JSON).

    Returns
    -------
    dict of str to str
        In this order; absolute paths are cut to their last part, login and host name are hidden.
    """
    entries: dict[str, object] = {"Title": title, "Description": description, "Author": author, "Copyright": rights}
    entries["Software"] = f"{software} {version}"
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


def xmp(
    *,
    title: str | None = None,
    caption: str | None = None,
    alt_text: str | None = None,
    author: str | None = None,
    rights: str | None = None,
    software: str | None = None,
    lang: str = "en",
) -> str:
    """Return an XMP packet, read only, in UTF-8.

    Parameters
    ----------
    title, caption, alt_text, author, rights, software : str, optional
        dc:title, dc:description, Iptc4xmpCore:AltTextAccessibility, dc:creator, dc:rights, xmp:CreatorTool; what is missing
        is left out. Folders in them are cut.
    lang : str
        Language of caption and alt text (RFC 3066 code), each given as default and under its language.

    Returns
    -------
    str
        Begins with ``<?xpacket``.

    Raises
    ------
    DomainError
        For a character that XML 1.0 forbids.
    """
    alternatives = {
        "dc:title": (title, None),  # in whatever language the scene is written
        "dc:description": (caption, lang),
        "Iptc4xmpCore:AltTextAccessibility": (alt_text, lang),
        "dc:rights": (rights, None),
    }
    lines = []
    for name, (text, language) in alternatives.items():
        if text:
            codes = ["x-default"] if language is None else ["x-default", language]
            items = "".join(f"<rdf:li xml:lang={quoteattr(code)}>{_xml(text)}</rdf:li>" for code in codes)
            lines.append(f"<{name}><rdf:Alt>{items}</rdf:Alt></{name}>")
    if author:
        lines.append(f"<dc:creator><rdf:Seq><rdf:li>{_xml(author)}</rdf:li></rdf:Seq></dc:creator>")
    if software:
        lines.append(f"<xmp:CreatorTool>{_xml(software)}</xmp:CreatorTool>")
    spaces = " ".join(f'xmlns:{prefix}="{address}"' for prefix, address in NAMESPACES.items() if prefix != "rdf")
    return (
        '<?xpacket begin="\ufeff" id="W5M0MpCehiHzreSzNTczkc9d"?>\n'
        f'<x:xmpmeta xmlns:x="adobe:ns:meta/"><rdf:RDF xmlns:rdf="{NAMESPACES["rdf"]}">\n'
        f'<rdf:Description rdf:about="" {spaces}>\n' + "\n".join(lines) + "\n"
        "</rdf:Description>\n</rdf:RDF></x:xmpmeta>\n"
        '<?xpacket end="r"?>'
    )


NAMESPACES = {
    "rdf": "http://www.w3.org/1999/02/22-rdf-syntax-ns#",
    "dc": "http://purl.org/dc/elements/1.1/",
    "xmp": "http://ns.adobe.com/xap/1.0/",
    "Iptc4xmpCore": "http://iptc.org/std/Iptc4xmpCore/1.0/xmlns/",
}
"""Of an XMP packet."""

_FORBIDDEN = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def _xml(text: str) -> str:
    """Return a text without folders, escaped."""
    if found := _FORBIDDEN.search(text):
        raise DomainError(f"the character {found[0]!r} has no place in metadata; take it out of {text[:40]!r}")
    return escape(strip_private(text))


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
