"""Remake the pictures of the README: python docs/tools/make_pictures.py [PART OF A NAME...].

The README is the list: a line that shows docs/pictures/NAME also names the command that makes it, in `code` or in a comment.
Each command runs in an empty folder; what it writes is kept as a small copy.
"""

import re
import shlex
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from PIL import Image

ROOT = Path(__file__).parents[2]
FOLDER = ROOT / "docs" / "pictures"
WIDTH = 900
PICTURE = re.compile(r"!\[[^\]]*\]\(docs/pictures/([\w.-]+)\)")
COMMAND = re.compile(r"(?:`|<!-- )(skyoptics [^`]+?)(?:`| -->)")


def gallery() -> dict[str, str]:
    """Return pictures of the README and the commands that make them."""
    found: dict[str, str] = {}
    for line in (ROOT / "README.md").read_text(encoding="utf-8").splitlines():
        names, commands = PICTURE.findall(line), COMMAND.findall(line)
        if not names:
            continue
        if len(names) != len(commands):
            raise SystemExit(f"pictures and commands do not pair off: {line[:90]}")
        found |= dict(zip(names, commands, strict=True))
    return found


def main(wanted: list[str]) -> None:
    """Run commands and keep small copies."""
    FOLDER.mkdir(exist_ok=True)
    program = str(Path(sys.executable).with_name("skyoptics"))
    for name, command in gallery().items():
        if wanted and not any(part in name for part in wanted):
            continue
        start = time.perf_counter()
        with tempfile.TemporaryDirectory() as place:
            subprocess.run([program, *shlex.split(command)[1:]], cwd=place, check=True, capture_output=True)
            keep(made(Path(place), Path(name).stem), FOLDER / name)
        print(f"{name}: {time.perf_counter() - start:.0f} s", flush=True)


def made(place: Path, stem: str) -> Path:
    """Return the picture that a command has written: of that name, or the only one."""
    pictures = sorted(place.rglob("*.png"))
    named = [path for path in pictures if path.stem == stem]
    if len(named or pictures) != 1:
        raise SystemExit(f"{stem}: which of {[path.name for path in pictures]}?")
    return (named or pictures)[0]


def keep(source: Path, path: Path) -> None:
    """Write a small copy."""
    image = Image.open(source).convert("RGB")
    if image.width > WIDTH:
        image = image.resize((WIDTH, round(image.height * WIDTH / image.width)), Image.Resampling.LANCZOS)
    image.save(path, quality=88, optimize=True)


if __name__ == "__main__":
    main(sys.argv[1:])
