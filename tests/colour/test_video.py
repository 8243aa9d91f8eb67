"""Films as another reader finds them: the demuxer and decoder of FFmpeg, Pillow's GIF reader."""

import av
import numpy as np
import pytest
from PIL import Image

from skyoptics.colour import video
from skyoptics.errors import DomainError, ResourceError


def picture(value, shape=(48, 64)):
    """Return a frame: a grey ramp, and a bright square that moves with `value`."""
    result = np.repeat(np.linspace(40, 200, shape[1])[None, :, None], shape[0], axis=0).repeat(3, axis=2)
    result[8:24, value : value + 16] = (230, 60, 40)
    return result.astype(np.uint8)


def decoded(path):
    with av.open(str(path)) as container:
        stream = container.streams.video[0]
        frames = [frame.to_ndarray(format="rgb24", src_colorspace="ITU709") for frame in container.decode(video=0)]
        return frames, stream, dict(container.metadata)


def test_mp4_says_what_it_is(tmp_path):
    path = tmp_path / "film.mp4"
    video.write_mp4(path, (picture(k) for k in range(12)), 12.5, {"title": "Ein Bogen", "comment": "wie gemacht"})
    frames, stream, about = decoded(path)
    assert len(frames) == 12
    assert frames[0].shape == (48, 64, 3)
    assert float(stream.average_rate) == 12.5
    assert stream.codec_context.name == "h264"
    assert about["title"] == "Ein Bogen"
    assert about["comment"] == "wie gemacht"
    # code points of ITU-T H.273: BT.709 primaries and matrix 1, sRGB curve 13, limited range 1
    context = stream.codec_context
    assert (context.color_primaries, context.color_trc, context.colorspace, context.color_range) == (1, 13, 1, 1)
    content = path.read_bytes()
    assert content.index(b"moov") < content.index(b"mdat")  # plays while it loads


def test_colours_survive_the_coder(tmp_path):
    """Flat colours away from edges come back within a few levels: the matrix and range said are the ones used."""
    path = tmp_path / "flat.mp4"
    flat = np.zeros((64, 96, 3), dtype=np.uint8)
    for place, colour in enumerate([(200, 40, 30), (30, 160, 50), (40, 60, 200)]):
        flat[:, 32 * place : 32 * place + 32] = colour
    video.write_mp4(path, [flat] * 3, 25)
    frames, _, _ = decoded(path)
    for place in range(3):
        middle = frames[1][16:48, 32 * place + 8 : 32 * place + 24].astype(float).mean(axis=(0, 1))
        assert middle == pytest.approx(flat[0, 32 * place + 16], abs=5)


def test_odd_sides_are_made_even(tmp_path):
    video.write_mp4(tmp_path / "odd.mp4", [picture(3, (47, 63))] * 2, 25)
    frames, _, _ = decoded(tmp_path / "odd.mp4")
    assert frames[0].shape == (48, 64, 3)


def test_the_same_frames_give_the_same_file(tmp_path):
    for name in ("a.mp4", "b.mp4"):
        video.write_mp4(tmp_path / name, (picture(k) for k in range(6)), 25)
    assert (tmp_path / "a.mp4").read_bytes() == (tmp_path / "b.mp4").read_bytes()


def test_no_half_film_is_left(tmp_path):
    def broken():
        yield picture(0)
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        video.write_mp4(tmp_path / "film.mp4", broken(), 25)
    with pytest.raises(DomainError, match="one film"):
        video.write_mp4(tmp_path / "film.mp4", [picture(0), picture(0, (30, 30))], 25)
    with pytest.raises(DomainError, match="one frame at least"):
        video.write_mp4(tmp_path / "film.mp4", [], 25)
    assert list(tmp_path.iterdir()) == []
    with pytest.raises(ResourceError, match="does not exist"):
        video.write_mp4(tmp_path / "no" / "film.mp4", [picture(0)], 25)


def test_gif_keeps_time_and_place(tmp_path):
    path = tmp_path / "film.gif"
    video.write_gif(path, picture, 9, 30.0, "ein Bogen")
    with Image.open(path) as film:
        assert film.n_frames == 9
        assert film.info["loop"] == 0
        assert b"ein Bogen" in film.info["comment"]
        delays = []
        for number in range(9):
            film.seek(number)
            delays.append(film.info["duration"])
            shown = np.asarray(film.convert("RGB")).astype(float)
            assert np.abs(shown - picture(number)).mean() < 4.0
        # 9 frames at 30 a second last 0.3 s, delays being whole hundredths
        assert sum(delays) == 300
        assert set(delays) == {30, 40}


def test_gif_of_a_still_does_not_flicker(tmp_path):
    video.write_gif(tmp_path / "still.gif", lambda _: picture(5), 4, 10.0)
    with Image.open(tmp_path / "still.gif") as film:
        first = np.asarray(film.convert("RGB"))
        for number in range(1, film.n_frames):
            film.seek(number)
            assert np.array_equal(np.asarray(film.convert("RGB")), first)


@pytest.mark.parametrize(
    ("name", "fps", "told"),
    [("a.avi", 25, ".mp4 or .gif"), ("a", 25, "no ending"), ("a.gif", 60, "at most 50 frames")],
)
def test_names_and_rates_are_refused_in_words(tmp_path, name, fps, told):
    with pytest.raises(DomainError, match=told):
        video.check(tmp_path / name, fps)
    video.check(tmp_path / "a.MP4", 60)
