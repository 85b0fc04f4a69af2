"""Sets pages and messages on a terminal, a pipe or a file, whatever its encoding and width."""

from __future__ import annotations

import codecs
import io
import shutil
import sys
import textwrap
import unicodedata
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from earthwork.errors import Warning
    from earthwork.reporting.page import Page, Table

#: Width where no terminal says its own.
_PIPE_WIDTH = 110
#: Longer values are sentences: they stand where notes do, and are wrapped.
_LONGEST_VALUE = 24
#: Names that are no longer than this stay on one line of a table [characters].
_SHORT_NAME = 14
_PLAIN = {
    "²": "2", "³": "3", "−": "-", "–": "-", "—": "-", "×": "x", "·": "*", "±": "+/-", "≥": ">=", "≤": "<=",
    "→": "->", "…": "...", "°": " deg", "½": "1/2", "“": '"', "”": '"', "‘": "'", "’": "'", "─": "-",
    "│": "|",
}  # fmt: skip


def _plain_characters(error: UnicodeError) -> tuple[str, int]:
    """Error handler of the streams: a character that the encoding lacks becomes its plain neighbour."""
    if not isinstance(error, UnicodeEncodeError):
        raise error
    text = error.object[error.start : error.end]
    plain = "".join(
        _PLAIN.get(c) or unicodedata.normalize("NFKD", c).encode("ascii", "ignore").decode() or "?" for c in text
    )
    return plain, error.end


def prepare_streams() -> None:
    """Make stdout and stderr take any text: what their encoding lacks is spelled plainly."""
    codecs.register_error("plain-characters", _plain_characters)
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="plain-characters")


def printable(text: str) -> str:
    """Text without the control characters by which a name could steer a terminal.

    >>> printable("lot\\x1b[2J 7")
    'lot?[2J 7'
    """
    return "".join(
        c if c == "\n" or unicodedata.category(c) not in ("Cc", "Cf", "Cs", "Zl", "Zp") else "?" for c in text
    )


def say(text: str) -> None:
    """One message on stderr."""
    print(printable(text), file=sys.stderr)


def say_error(message: str) -> None:
    """The one message of a failure."""
    say(f"error: {message}")


def say_warnings(warnings: tuple[Warning, ...]) -> None:
    """Each warning with its code."""
    for warning in warnings:
        say(f"warning [{warning.code}]: {warning.message}")


def print_json(text: str) -> None:
    """A JSON document on stdout; what its encoding lacks is escaped, which JSON allows everywhere."""
    encoding = (getattr(sys.stdout, "encoding", None) or "ascii").lower().replace("-", "")
    if encoding != "utf8":
        text = "".join(c if c.isascii() else _escaped(c) for c in text)
    sys.stdout.write(text)


def _escaped(character: str) -> str:
    code = ord(character)
    if code < 0x10000:
        return f"\\u{code:04x}"
    code -= 0x10000
    return f"\\u{0xD800 + (code >> 10):04x}\\u{0xDC00 + (code & 0x3FF):04x}"


def print_page(page: Page) -> None:
    """A page on stdout."""
    from rich.console import Console
    from rich.text import Text

    from earthwork.reporting.page import Facts, Table

    width = shutil.get_terminal_size((_PIPE_WIDTH, 40)).columns
    # Set aside first: the console ends the process itself when its reader is gone.
    sheet = io.StringIO()
    console = Console(
        file=sheet,
        width=max(width, 40),
        force_terminal=sys.stdout.isatty(),
        highlight=False,
        markup=False,
        emoji=False,
    )
    narrow = console.width
    console.print(Text(printable(page.title), style="bold"))
    for block in page.blocks:
        console.print()
        if block.heading:
            console.print(Text(printable(block.heading), style="bold"))
        if isinstance(block, Facts):
            console.print(_facts(block.rows))
        elif isinstance(block, Table):
            # A number that is cut off is a wrong number: where there is no room for all, the line runs on.
            headings = _headings(block, wrapped=False)
            if _least_width(block, headings) > narrow:
                headings = _headings(block, wrapped=True)
            console.width = max(narrow, _least_width(block, headings))
            console.print(_table(block, headings))
            console.width = narrow
            if block.left_out:
                console.print(Text(f"  … and {block.left_out:,} more rows: all are in --json and in --out DIR"))
        else:
            console.print(_notes(block.lines))
    lines = (line.rstrip() for line in sheet.getvalue().splitlines())
    sys.stdout.write("\n".join(lines) + "\n")


def _facts(rows: tuple[tuple[str, str, str], ...]) -> Any:
    from rich.table import Table as Grid
    from rich.text import Text

    grid = Grid.grid(padding=(0, 2))
    grid.add_column(no_wrap=True)
    grid.add_column(justify="right", no_wrap=True)
    grid.add_column()
    for label, value, note in rows:
        if len(value) > _LONGEST_VALUE:
            value, note = "", f"{value}; {note}" if note else value
        grid.add_row(Text("  " + printable(label)), Text(printable(value)), Text(printable(note)))
    return grid


def _notes(lines: tuple[str, ...]) -> Any:
    from rich.table import Table as Grid
    from rich.text import Text

    grid = Grid.grid(padding=(0, 1))
    grid.add_column(no_wrap=True)
    grid.add_column()
    for line in lines:
        grid.add_row(Text("  -"), Text(printable(line)))
    return grid


def _headings(block: Table, *, wrapped: bool) -> list[str]:
    """The headings of a table, those of numbers no wider than they must be where the room is scarce."""
    headings = [printable(column) for column in block.columns]
    if wrapped:
        for i in range(block.text_columns, len(headings)):
            width = max([len(word) for word in headings[i].split()] + [len(printable(row[i])) for row in block.rows])
            headings[i] = textwrap.fill(headings[i], width, break_on_hyphens=False)
    return headings


def _least_width(block: Table, headings: list[str]) -> int:
    """Width that a table must have: whole numbers and short names, and some letters of long names."""
    width = 1
    for i, heading in enumerate(headings):
        longest = max([len(printable(row[i])) for row in block.rows], default=0)
        words = max(len(word) for word in [*heading.split(), ""])
        lines = max(len(line) for line in [*heading.splitlines(), ""])
        width += 3 + (max(min(longest, _SHORT_NAME), words) if i < block.text_columns else max(longest, lines))
    return width


def _table(block: Table, headings: list[str]) -> Any:
    from rich import box
    from rich.table import Table as Grid
    from rich.text import Text

    grid = Grid(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=True, header_style="", padding=(0, 1))
    for i, heading in enumerate(headings):
        name = i < block.text_columns
        grid.add_column(
            Text(heading),
            justify="left" if name else "right",
            no_wrap=not name or max((len(row[i]) for row in block.rows), default=0) <= _SHORT_NAME,
            overflow="fold",
            vertical="bottom",
        )
    for i, row in enumerate(block.rows):
        last = i == len(block.rows) - block.totals - 1
        grid.add_row(*(Text(printable(cell)) for cell in row), end_section=last and block.totals > 0)
    return grid
