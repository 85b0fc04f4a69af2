"""Sets pages and messages on a terminal, a pipe or a file, whatever its encoding and width."""

from __future__ import annotations

import codecs
import io
import shutil
import sys
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
#: Room that notes have at least [characters].
_LEAST_NOTE = 16
#: Soft hyphen, (non-)joiners, marks of direction: terminals disagree on their width.
_UNSEEN = "\u00ad\u200b\u200c\u200d\u200e\u200f\u2060\ufeff"
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
    return "".join(_plain(c) for c in text), error.end


def _plain(character: str) -> str:
    """A character in ASCII: its neighbour, its letter without accents, nothing for a lone accent, else "?"."""
    if unicodedata.combining(character):
        return ""
    letters = unicodedata.normalize("NFKD", character).encode("ascii", "ignore").decode()
    return _PLAIN.get(character) or letters or "?"


def prepare_streams() -> None:
    """Make stdout and stderr take any text: what their encoding lacks is spelled plainly."""
    codecs.register_error("plain-characters", _plain_characters)
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="plain-characters")


def printable(text: str) -> str:
    """Text without the control characters by which a name could steer a terminal.

    Those that only say how letters join or may be parted take no room and are left out.

    >>> printable("lot\\x1b[2J 7"), printable("east\\u00adern")
    ('lot?[2J 7', 'eastern')
    """
    return "".join(
        c if c == "\n" or unicodedata.category(c) not in ("Cc", "Cf", "Cs", "Zl", "Zp") else "?"
        for c in text
        if c not in _UNSEEN
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


def _spelled(text: str) -> str:
    """A text as stdout will show it: what its encoding lacks is spelled before columns are measured."""
    encoding = getattr(sys.stdout, "encoding", None) or "utf-8"
    codecs.register_error("plain-characters", _plain_characters)
    return printable(text).encode(encoding, "plain-characters").decode(encoding)


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
    console.print(Text(_spelled(page.title), style="bold"))
    for block in page.blocks:
        console.print()
        if block.heading:
            console.print(Text(_spelled(block.heading), style="bold"))
        if isinstance(block, Facts):
            if block.rows:
                console.print(_facts(block.rows, narrow))
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


def _facts(rows: tuple[tuple[str, str, str], ...], narrow: int) -> Any:
    """Labels, values and notes: a value is never cut; long labels and notes run over several lines."""
    from rich.cells import cell_len
    from rich.console import Group
    from rich.padding import Padding
    from rich.table import Table as Grid
    from rich.text import Text

    shown = []
    for label, value, note in rows:
        if cell_len(value) > _LONGEST_VALUE:
            value, note = "", f"{value}; {note}" if note else value
        shown.append((_spelled(label), _spelled(value), _spelled(note)))
    labels, values, notes = (max(cell_len(row[i]) for row in shown) for i in range(3))
    beside = narrow - values - 6
    # What the notes do not need is for the labels; both share what is scarce.
    labels = min(labels, max(beside - notes, beside // 2, _SHORT_NAME))
    below = min(notes, _LEAST_NOTE) > beside - labels
    if below:
        labels = min(max(cell_len(row[0]) for row in shown), max(narrow - values - 6, _SHORT_NAME))
    lines: list[Any] = []
    for label, value, note in shown:
        line = Grid.grid(padding=(0, 2, 0, 0))
        line.add_column(width=0)
        line.add_column(width=labels, overflow="fold")
        line.add_column(width=values, justify="right", no_wrap=True)
        line.add_column(overflow="fold")
        line.add_row("", Text(label), Text(value), Text("" if below else note))
        lines.append(line)
        if below and note:
            lines.append(Padding(Text(note, overflow="fold"), (0, 0, 0, 4)))
    return Group(*lines)


def _notes(lines: tuple[str, ...]) -> Any:
    from rich.table import Table as Grid
    from rich.text import Text

    grid = Grid.grid(padding=(0, 1))
    grid.add_column(no_wrap=True)
    grid.add_column(overflow="fold")
    for line in lines:
        grid.add_row(Text("  -"), Text(_spelled(line)))
    return grid


def _headings(block: Table, *, wrapped: bool) -> list[str]:
    """The headings of a table, no wider than they must be where the room is scarce."""
    from rich.cells import cell_len

    headings = [_spelled(column) for column in block.columns]
    if not wrapped:
        return headings
    for i, heading in enumerate(headings):
        cells = max([cell_len(_spelled(row[i])) for row in block.rows], default=0)
        if i < block.text_columns:
            cells = min(cells, _SHORT_NAME)
        words = max([cell_len(word) for word in heading.split()], default=0)
        # A name for a heading is set wider before it stands as a tower of words.
        tower = _SHORT_NAME if cell_len(heading) > 5 * max(cells, words) else 0
        headings[i] = _broken(heading, max(cells, min(words, _LONGEST_VALUE), tower))
    return headings


def _broken(text: str, width: int) -> str:
    """A text on lines of at most so many cells, broken between words where they are not too long."""
    from rich.console import Console
    from rich.text import Text

    lines = Text(text).wrap(Console(file=io.StringIO(), width=width), width, overflow="fold")
    return "\n".join(line.plain.rstrip() for line in lines)


def _least_width(block: Table, headings: list[str]) -> int:
    """Width that a table must have: whole numbers and short names, and some letters of long names [cells]."""
    from rich.cells import cell_len

    width = 1
    for i, heading in enumerate(headings):
        longest = max([cell_len(_spelled(row[i])) for row in block.rows], default=0)
        if i < block.text_columns:
            longest = min(longest, _SHORT_NAME)
        width += 3 + max([longest, *(cell_len(line) for line in heading.splitlines())])
    return width


def _table(block: Table, headings: list[str]) -> Any:
    from rich import box
    from rich.cells import cell_len
    from rich.table import Table as Grid
    from rich.text import Text

    grid = Grid(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=True, header_style="", padding=(0, 1))
    for i, heading in enumerate(headings):
        name = i < block.text_columns
        longest = max((cell_len(_spelled(row[i])) for row in block.rows), default=0)
        grid.add_column(
            Text(heading),
            justify="left" if name else "right",
            no_wrap=not name or longest <= _SHORT_NAME,
            overflow="fold",
            vertical="bottom",
        )
    for i, row in enumerate(block.rows):
        last = i == len(block.rows) - block.totals - 1
        grid.add_row(*(Text(_spelled(cell)) for cell in row), end_section=last and block.totals > 0)
    return grid
