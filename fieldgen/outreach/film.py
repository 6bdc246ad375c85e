"""Films as MP4 or GIF, a frame at a time."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path

import numpy as np
from PIL import Image

from fieldgen.errors import OutputError
from fieldgen.outreach.colours import make_palette, reduce_colours
from fieldgen.products.atomic import whole_file

STEPS_PER_SECOND = 8
"""Pace of a film: steps of the products a second."""

HOLD = 2.0
"""How long the last picture stays [s]."""

REPEATS = 3
"""Frames of an MP4 a step, so that it plays 24 a second, which all players do."""

QUALITY = {"crf": "20", "preset": "veryfast"}
"""Of H.264: constant rate factor (lower is better), and effort."""

BT709 = 1
"""Number of the colours that players expect of large pictures (ITU-T H.273)."""

GIF_SHARE = 0.5
"""Size of a GIF, against the shape's."""

GIF_COLOURS = 96


def check_encoder() -> None:
    """Raise OutputError if the library that writes MP4 is not installed."""
    try:
        import av  # noqa: F401
    except ImportError:
        raise OutputError(
            "MP4: needs the library av, which is not installed. "
            "Run pip install 'fieldgen[film]', or choose --format gif."
        ) from None


def write_mp4(pictures: Iterator[Image.Image], path: Path, *, title: str, comment: str) -> None:
    """A film in H.264 (yuv420p), which starts before it is loaded whole.

    pictures : one a step, of one even size; held in memory one at a time
    Raises OutputError.
    """
    import av

    with whole_file(path) as part:
        options = {"movflags": "faststart"}
        with av.open(str(part), "w", format="mp4", options=options) as container:
            container.metadata.update({"title": title, "comment": comment})
            stream, count = None, 0
            for picture, repeats in _with_repeats(pictures):
                if stream is None:
                    stream = _add_stream(container, picture.size)
                frame = av.VideoFrame.from_image(picture).reformat(
                    format="yuv420p", dst_colorspace=BT709, dst_color_range="MPEG"
                )
                for frame.pts in range(count, count + repeats):
                    container.mux(stream.encode(frame))
                count += repeats
            container.mux(stream.encode())


def _add_stream(container, size: tuple[int, int]):
    rate = STEPS_PER_SECOND * REPEATS
    stream = container.add_stream("libx264", rate=rate, options=QUALITY)
    stream.width, stream.height = size
    stream.pix_fmt = "yuv420p"
    context = stream.codec_context
    context.colorspace = context.color_primaries = context.color_trc = BT709
    context.color_range = 1  # from 16 to 235
    stream.time_base = stream.codec_context.time_base = Fraction(1, rate)
    return stream


def _with_repeats(pictures: Iterator[Image.Image]) -> Iterator[tuple[Image.Image, int]]:
    """Each picture, and how many frames it lasts; the last one is shown again and held."""
    picture = None
    for picture in pictures:
        yield picture, REPEATS
    yield picture, round(HOLD * STEPS_PER_SECOND * REPEATS) - REPEATS


def write_gif(pictures: Iterator[Image.Image], path: Path, *, comment: str) -> None:
    """A film as GIF without end, half as large, with one set of colours for all pictures.

    pictures : one a step. Raises OutputError.
    """
    small = (_shrink(picture) for picture in pictures)
    first = next(small)
    palette = make_palette(first, GIF_COLOURS)
    frames = [reduce_colours(frame, palette) for frame in (first, *small)]
    duration = [round(100 / STEPS_PER_SECOND) * 10] * len(frames)  # GIF counts in 10 ms
    duration[-1] = int(1000 * HOLD)
    with whole_file(path) as part:
        frames[0].save(
            part, format="GIF", save_all=True, append_images=frames[1:], duration=duration,
            loop=0, optimize=False, disposal=1, comment=comment.encode()[:255],
        )  # fmt: skip


def _shrink(picture: Image.Image) -> Image.Image:
    size = tuple(np.array(np.array(picture.size) * GIF_SHARE, dtype=int).tolist())
    return picture.resize(size, Image.Resampling.LANCZOS)
