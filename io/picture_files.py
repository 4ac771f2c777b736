"""The pictures of a job as files, each as SVG that follows light or dark and as PNG on light ground."""

import os
from pathlib import Path

from ..ident.errors import RequestError
from .outcome import Outcome
from .progress import Progress, silent


def write_pictures(outcome: Outcome, folder: Path, progress: Progress = silent) -> tuple[Path, ...]:
    """Write every picture of a job into `folder`, which is made where it isn't there; each file whole or not at all.

    Parameters
    ----------
    outcome : Outcome
    folder : Path
    progress : Progress

    Returns
    -------
    tuple of Path
        The files, in the order of the report: ``step.svg``, ``step.png``, ``ribbon.svg``, ...

    Raises
    ------
    RequestError
        The folder can't be made or written to.
    """
    from .figures.gallery import gallery
    from .figures.svg import png_bytes, svg_file

    written: list[Path] = []
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for picture in gallery(outcome):
            progress(f"drawing {picture.name}")
            svg = svg_file(picture.figure, picture.name, picture.title).encode()
            for ending, content in ((".svg", svg), (".png", png_bytes(picture.figure))):
                written.append(_write(folder, picture.name + ending, content))
    except OSError as cause:
        raise RequestError(
            "the pictures can't be written here",
            where=str(folder),
            found=cause.strerror or str(cause),
            expected="a folder that this user may write to",
            advice="name another folder with --pictures",
        ) from cause
    return tuple(written)


def _write(folder: Path, name: str, content: bytes) -> Path:
    part, final = folder / f".{name}.part", folder / name
    try:
        part.write_bytes(content)
        os.replace(part, final)
    finally:
        part.unlink(missing_ok=True)
    return final
