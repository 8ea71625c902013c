"""What all figures share: marks that do not rest on colour, a plain look, the same bytes each time."""

from __future__ import annotations

import io
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from phasedb.errors import InputError

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

INK: Final = "#1b2530"
FAINT: Final = "#8a939c"

WIDE: Final = (9.4, 5.6)
NARROW: Final = (4.4, 5.6)  # for narrow screens

FORMATS: Final = ("svg", "png", "pdf")


@dataclass(frozen=True, slots=True)
class Mark:
    """How one phase is marked: a letter, a colour and a shape, any of which is enough."""

    letter: str
    colour: str
    shape: str  # a matplotlib marker


# Colours: Okabe & Ito, "Color Universal Design" (2008), a palette made for colour-blind readers (hex values
# from memory); without its yellow, too faint on paper. The shapes and letters carry the same distinction.
MARKS: Final = (
    Mark("A", "#0072b2", "o"),
    Mark("B", "#d55e00", "s"),
    Mark("C", "#009e73", "^"),
    Mark("D", "#cc79a7", "D"),
    Mark("E", "#e69f00", "v"),
    Mark("F", "#56b4e9", "P"),
)
_LETTERS: Final = "ABCDEFGHIJKLMNOPQRSTVWYZ"  # U and X mean something else
UNLISTED_MARK: Final = Mark("U", "#000000", "*")
FOREIGN_MARK: Final = Mark("X", FAINT, "x")

_LOOK: Final[dict[str, Any]] = {
    "svg.fonttype": "none",  # text stays text: it can be searched and read aloud
    "svg.hashsalt": "phasedb",
    "pdf.fonttype": 42,
    "text.parse_math": False,  # a $ in a name is a $
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 9,
    "axes.linewidth": 0.8,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "path.simplify": True,
}


@contextmanager
def look() -> Iterator[None]:
    """Draw inside this: the settings of all our figures, and none of the user's own."""
    import warnings

    import matplotlib as mpl

    with mpl.rc_context(), warnings.catch_warnings():
        # the font lacks some scripts: a page's reader has them, and a paper's figure shows boxes
        warnings.filterwarnings("ignore", "Glyph .* missing from font", UserWarning)
        mpl.rcdefaults()
        settings: Any = mpl.rcParams
        settings.update(_LOOK)
        yield


def new_figure(width_inches: float, height_inches: float) -> Figure:
    """Return an empty figure that lays itself out."""
    from matplotlib.figure import Figure

    return Figure(figsize=(width_inches, height_inches), layout="constrained")


def shortened(text: str, most: int = 26) -> str:
    """Return `text` on one line, shortened with an ellipsis for a label that must stay small."""
    from phasedb.report.table import printable

    text = printable(text)
    return text if len(text) <= most else text[: most - 1].rstrip() + "…"


def mark_for(index: int) -> Mark:
    """Return the mark of the phase of that rank (from 0); after the sixth they repeat with new letters."""
    base = MARKS[index % len(MARKS)]
    turn, place = divmod(index, len(_LETTERS))
    return Mark(_LETTERS[place] + (str(turn + 1) if turn else ""), base.colour, base.shape)


def light_grid(axes: Axes) -> None:
    """Thin lines behind the data, for reading values off."""
    axes.grid(visible=True, color="#dfe3e6", linewidth=0.5)
    axes.set_axisbelow(True)


def figure_format(path: Path) -> str:
    """Return the format that a figure's file name asks for.

    Raises
    ------
    InputError
        If the ending is not .svg, .png or .pdf.
    """
    suffix = path.suffix.lower().removeprefix(".")
    if suffix not in FORMATS:
        raise InputError(
            f"a figure cannot be written as {path.suffix or 'a file without an ending'!r}",
            where=str(path),
            hint="end the name with .svg, .png or .pdf",
        )
    return suffix


def figure_bytes(figure: Figure, kind: str) -> bytes:
    """Return the figure as a file of that kind, without dates or program names."""
    metadata: dict[str, dict[str, None]] = {
        "svg": {"Date": None, "Creator": None, "Format": None, "Type": None},
        "pdf": {"CreationDate": None, "Creator": None, "Producer": None},
        "png": {"Software": None},
    }
    buffer = io.BytesIO()
    figure.savefig(buffer, format=kind, metadata=metadata[kind], dpi=200)
    return buffer.getvalue()


def save_figure(figure: Figure, path: Path) -> None:
    """Write the figure in the format that its name asks for."""
    write_file(path, figure_bytes(figure, figure_format(path)))


def write_file(path: Path, content: bytes) -> None:
    """Write a result file whole or not at all.

    Raises
    ------
    InputError
        If the place cannot be written to.
    """
    import os

    partial = path.with_name(f".{path.name}.{os.getpid()}.partial")
    try:
        partial.write_bytes(content)
        partial.replace(path)
    except OSError as error:
        partial.unlink(missing_ok=True)
        raise InputError(
            f"cannot write the file: {error.strerror}",
            where=str(path),
            hint="choose another place with -o or --figure",
        ) from error
