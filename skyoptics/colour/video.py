"""Films from frames: MP4 (H.264) and GIF.

An MP4 says of itself what its numbers mean: BT.709 primaries and matrix, sRGB's transfer curve, limited range (code points of
ITU-T H.273). A GIF has 256 colours: one palette for the whole film and a threshold fixed by place, so that nothing flickers.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Mapping
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.colour.images import dither_threshold, replacing
from skyoptics.errors import DomainError, ResourceError

ENDINGS = (".mp4", ".gif")
FASTEST_GIF = 50.0
"""Frames a second; readers of GIF take shorter delays for a fault and show them slowly (common practice, no source)."""
QUALITY = 18
"""Constant rate factor of x264; smaller is better and larger."""

_BT709, _SRGB_CURVE, _LIMITED = 1, 13, 1
_THREADS = 2  # a fixed number, so that a film does not depend on the machine
_SAMPLES = 40000  # pixels from which a palette is found


def check(path: Path, fps: float) -> None:
    """Refuse a file name or a rate that no film can have.

    Raises
    ------
    DomainError
        With the endings there are.
    """
    if path.suffix.lower() not in ENDINGS:
        given = f'"{path.suffix}"' if path.suffix else "no ending"
        raise DomainError(f"{path.name} has {given}: a film is written as {' or '.join(ENDINGS)}")
    if path.suffix.lower() == ".gif" and fps > FASTEST_GIF:
        raise DomainError(
            f"a GIF shows at most {FASTEST_GIF:g} frames a second, not {fps:g}; lower --fps or write .mp4"
        )


def write_mp4(
    path: str | os.PathLike[str],
    frames: Iterable[NDArray[np.uint8]],
    fps: float,
    text: Mapping[str, str] | None = None,
) -> None:
    """Write frames as H.264 in MP4, the index in front so that it plays while it loads.

    Parameters
    ----------
    path : path
        Where; an existing file is replaced when all is done.
    frames : iterable of ndarray of uint8, shape (ny, nx, 3)
        sRGB, all of one size; a side of an odd number of pixels gets its last row or column twice, since H.264 takes even
        ones.
    fps : float
        Frames a second.
    text : mapping of str to str, optional
        Metadata: ``title``, ``comment`` and other names of the format.

    Raises
    ------
    DomainError
        Without frames, or for frames of several sizes.
    ResourceError
        If it cannot be written.
    """
    import av

    rate = Fraction(fps).limit_denominator(1001)
    with replacing(path) as aside:
        try:
            with av.open(str(aside), "w", format="mp4", options={"movflags": "+faststart"}) as container:
                container.metadata.update(text or {})
                stream: Any = None
                size = (0, 0)
                for picture in frames:
                    if stream is None:
                        size = _shape(picture)
                        stream = _stream(container, rate, size)
                    elif _shape(picture) != size:
                        raise DomainError(f"frames of {size} and {_shape(picture)} pixels cannot stand in one film")
                    for packet in stream.encode(_frame(picture)):
                        container.mux(packet)
                if stream is None:
                    raise DomainError("a film needs one frame at least")
                for packet in stream.encode(None):
                    container.mux(packet)
        except av.FFmpegError as error:
            raise ResourceError(f"{Path(path).name}: the film cannot be written ({error})") from error


def _shape(picture: NDArray[np.uint8]) -> tuple[int, int]:
    if picture.ndim != 3 or picture.shape[2] != 3 or 0 in picture.shape or picture.dtype != np.uint8:
        raise DomainError(f"a frame needs shape (ny, nx, 3) of 8-bit values, got {picture.shape} of {picture.dtype}")
    return picture.shape[0], picture.shape[1]


def _stream(container: Any, rate: Fraction, size: tuple[int, int]) -> Any:
    stream = container.add_stream("libx264", rate=rate)
    stream.height, stream.width = (side + side % 2 for side in size)
    stream.pix_fmt = "yuv420p"
    stream.options = {"crf": str(QUALITY), "preset": "veryfast", "threads": str(_THREADS)}
    context = stream.codec_context
    context.color_primaries, context.color_trc = _BT709, _SRGB_CURVE
    context.colorspace, context.color_range = _BT709, _LIMITED
    return stream


def _frame(picture: NDArray[np.uint8]) -> Any:
    """Return a frame as the coder takes it."""
    import av

    rows, columns, _ = picture.shape
    if rows % 2 or columns % 2:
        picture = np.pad(picture, ((0, rows % 2), (0, columns % 2), (0, 0)), mode="edge")
    frame = av.VideoFrame.from_ndarray(np.ascontiguousarray(picture), format="rgb24")
    coded = frame.reformat(
        format="yuv420p",
        dst_colorspace="ITU709",
        src_color_range="JPEG",
        dst_color_range="MPEG",
        interpolation="BICUBIC",
    )
    coded.color_primaries, coded.color_trc = _BT709, _SRGB_CURVE
    return coded


def write_gif(
    path: str | os.PathLike[str],
    frame: Callable[[int], NDArray[np.uint8]],
    count: int,
    fps: float,
    comment: str = "",
) -> None:
    """Write frames as a GIF that starts anew at its end.

    Parameters
    ----------
    path : path
        Where; an existing file is replaced when all is done.
    frame : callable
        Number → ndarray of uint8, shape (ny, nx, 3), sRGB; asked twice for some.
    count : int
        Number of frames.
    fps : float
        Frames a second, at most `FASTEST_GIF`; delays are whole hundredths of a second that keep the length of the film.
    comment : str, optional
        Put into the file.

    Raises
    ------
    DomainError
        Without frames.
    ResourceError
        If it cannot be written.
    """
    from PIL import Image

    if count < 1:
        raise DomainError("a film needs one frame at least")
    palette, spacing = _palette(frame, count)
    first = frame(0)
    threshold = dither_threshold(np.arange(first.shape[0]), np.arange(first.shape[1])) - 0.5

    def indexed(number: int) -> Any:
        shifted = np.clip(frame(number) + spacing * threshold, 0.0, 255.0)
        picture = Image.fromarray(np.round(shifted).astype(np.uint8))
        return picture.quantize(palette=palette, dither=Image.Dither.NONE)

    ends = [round(100.0 * (number + 1) / fps) for number in range(count)]
    delays = [10 * (end - start) for start, end in zip([0, *ends[:-1]], ends, strict=True)]
    with replacing(path) as aside:
        indexed(0).save(
            aside,
            format="GIF",
            save_all=True,
            append_images=(indexed(number) for number in range(1, count)),
            duration=delays if count > 1 else delays[0],
            loop=0,
            comment=comment.encode("utf-8")[:255],
            optimize=False,
        )


def _palette(frame: Callable[[int], NDArray[np.uint8]], count: int) -> tuple[Any, float]:
    """Return a palette for a whole film, and the spread of its dither [LSB]."""
    from PIL import Image

    numbers = sorted({round(k * (count - 1) / 7) for k in range(8)})
    taken = []
    for number in numbers:
        pixels = frame(number).reshape(-1, 3)
        step = max(1, len(numbers) * len(pixels) // _SAMPLES)
        taken.append(pixels[number % step :: step])
    sample = np.concatenate(taken)
    found = Image.fromarray(sample[None]).quantize(256, method=Image.Quantize.MEDIANCUT, kmeans=2)
    colours = np.array(found.getpalette(), dtype=np.float64).reshape(-1, 3)[np.asarray(found)[0]]
    return found, float(2.0 * np.sqrt(np.mean((colours - sample) ** 2)))
