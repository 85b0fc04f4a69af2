"""Progress: nothing for short work, a bar on a terminal, lines elsewhere."""

import io

from earthwork_cli.progress import ProgressBar


class _Clock:
    def __init__(self):
        self.now = 0.0

    def __call__(self):
        return self.now


class _Terminal(io.StringIO):
    def isatty(self):
        return True


def _run(stream, seconds, **options):
    clock = _Clock()
    with ProgressBar("volumes", stream=stream, clock=clock, **options) as progress:
        for done in range(1, 101):
            clock.now = seconds * done / 100
            progress(done, 100)
    return stream.getvalue()


def test_short_work_is_silent():
    assert _run(_Terminal(), 1.4) == ""


def test_long_work_gets_a_line_now_and_then():
    lines = _run(io.StringIO(), 60).splitlines()
    assert 5 <= len(lines) <= 6
    assert lines[0].startswith("volumes:   3 %, about 58 s left")
    assert all("\x1b" not in line for line in lines)


def test_a_terminal_gets_a_bar_that_is_cleared():
    text = _run(_Terminal(), 10)
    assert "[###" in text
    assert text.endswith("\r\x1b[2K")


def test_quiet():
    assert _run(_Terminal(), 60, quiet=True) == ""


def test_a_closed_stderr_does_not_stop_the_work():
    class Broken(io.StringIO):
        def write(self, text):
            raise BrokenPipeError

    assert _run(Broken(), 60) == ""
