"""Progress: plain lines in a log, a bar on a terminal, the same events in both."""

import io
import re

from fogline.progress import progress_for


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def tell(progress):
    progress.note("resumed")
    progress.stage("sampling", 40)
    progress.advance(20)
    progress.status("20 steps, autocorrelation time 3")
    progress.advance(20)
    progress.close()


LINES = [
    "joint, ensemble 1: resumed",
    "joint, ensemble 1: sampling, at most 40 steps",
    "joint, ensemble 1: 20 steps, autocorrelation time 3",
]


def test_log_has_plain_lines_without_times():
    log, shown = io.StringIO(), io.StringIO()
    tell(progress_for("joint, ensemble 1", log=log, terminal=shown))
    assert log.getvalue().splitlines() == LINES
    assert shown.getvalue() == log.getvalue()


def test_terminal_gets_a_bar_with_rate_and_status():
    log, shown = io.StringIO(), Terminal()
    tell(progress_for("joint, ensemble 1", log=log, terminal=shown))
    assert log.getvalue().splitlines() == LINES
    last = shown.getvalue().split("\r")[-1]
    assert "joint, ensemble 1: sampling: 100%" in last
    assert re.search(r"40/40 \[.*step/s, 20 steps, autocorrelation time 3\]", last)
    assert "resumed" in shown.getvalue()
