"""Progress of an ensemble: a bar with rate on a terminal, plain lines in a log."""

from __future__ import annotations

import sys
from typing import Protocol, TextIO

from tqdm import tqdm


class Progress(Protocol):
    """What a run tells about itself."""

    def stage(self, name: str, n_steps: int) -> None:
        """Begin a stage of at most `n_steps` steps."""

    def advance(self, n_steps: int) -> None:
        """Count steps done in the stage."""

    def note(self, text: str) -> None:
        """Say something worth keeping."""

    def status(self, text: str) -> None:
        """Say how it stands."""

    def close(self) -> None:
        """Finish."""


class Silent:
    """Says nothing."""

    def stage(self, name: str, n_steps: int) -> None:
        """Ignore."""

    def advance(self, n_steps: int) -> None:
        """Ignore."""

    def note(self, text: str) -> None:
        """Ignore."""

    def status(self, text: str) -> None:
        """Ignore."""

    def close(self) -> None:
        """Ignore."""


class Lines:
    """One line per stage and status; no times, so that logs of equal runs are equal.

    Parameters
    ----------
    stream : text stream
        Where to write.
    label : str
        Begins every line.
    """

    def __init__(self, stream: TextIO, label: str) -> None:
        self._stream = stream
        self._label = label

    def stage(self, name: str, n_steps: int) -> None:
        """Write the stage's name and length."""
        self.note(f"{name}, at most {n_steps} steps")

    def advance(self, n_steps: int) -> None:
        """Ignore: a log needs no pulse."""

    def note(self, text: str) -> None:
        """Write the text."""
        print(f"{self._label}: {text}", file=self._stream, flush=True)

    def status(self, text: str) -> None:
        """Write the text."""
        self.note(text)

    def close(self) -> None:
        """Nothing is open."""


class Bar:
    """A bar per stage, with steps per second and the latest status.

    Parameters
    ----------
    stream : text stream
        A terminal.
    label : str
        Begins every bar.
    """

    def __init__(self, stream: TextIO, label: str) -> None:
        self._stream = stream
        self._label = label
        self._bar: tqdm | None = None

    def stage(self, name: str, n_steps: int) -> None:
        """Close the former bar and open one."""
        self.close()
        text = f"{self._label}: {name}"
        self._bar = tqdm(total=n_steps, desc=text, unit="step", file=self._stream)

    def advance(self, n_steps: int) -> None:
        """Move the bar."""
        if self._bar is not None:
            self._bar.update(n_steps)

    def note(self, text: str) -> None:
        """Write the text above the bar."""
        tqdm.write(f"{self._label}: {text}", file=self._stream)

    def status(self, text: str) -> None:
        """Put the text behind the bar."""
        if self._bar is not None:
            self._bar.set_postfix_str(text)

    def close(self) -> None:
        """Leave the bar as it stands."""
        if self._bar is not None:
            self._bar.close()
            self._bar = None


class Both:
    """Tells two others, such as a log and a terminal.

    Parameters
    ----------
    first, second : Progress
    """

    def __init__(self, first: Progress, second: Progress) -> None:
        self._members = (first, second)

    def stage(self, name: str, n_steps: int) -> None:
        """Pass on."""
        for member in self._members:
            member.stage(name, n_steps)

    def advance(self, n_steps: int) -> None:
        """Pass on."""
        for member in self._members:
            member.advance(n_steps)

    def note(self, text: str) -> None:
        """Pass on."""
        for member in self._members:
            member.note(text)

    def status(self, text: str) -> None:
        """Pass on."""
        for member in self._members:
            member.status(text)

    def close(self) -> None:
        """Pass on."""
        for member in self._members:
            member.close()


def progress_for(label: str, log: TextIO, terminal: TextIO | None = None) -> Progress:
    """Return lines in a log, and a bar as well where somebody watches a terminal.

    Parameters
    ----------
    label : str
        What runs, e.g. ``joint, ensemble 1``.
    log : text stream
        Takes plain lines.
    terminal : text stream, optional
        By default stderr; lines go there too where it is no terminal.

    Returns
    -------
    Progress
    """
    terminal = sys.stderr if terminal is None else terminal
    shown = Bar(terminal, label) if terminal.isatty() else Lines(terminal, label)
    return Both(Lines(log, label), shown)
