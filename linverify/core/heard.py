"""What plants print while they are called: counted, and told once in place of thousands of lines.

A plant is called hundreds of thousands of times. The command line takes its standard output aside, so that verdicts can
be read; its standard error is left alone. pytest captures both by itself, and shows them where a check fails.
"""

from __future__ import annotations

import io

LONGEST = 60  # characters of the first line that are shown


class Heard(io.TextIOBase):
    """Stands in for standard output. Mutable: keeps the beginning of the first line, and counts lines."""

    def __init__(self) -> None:
        self._begun = ""
        self.lines = 0

    def writable(self) -> bool:
        """As a stream that can be printed to."""
        return True

    def write(self, text: str) -> int:
        """Count the lines of `text`, and keep the first one that says something."""
        self.lines += text.count("\n")
        if "\n" not in self._begun:
            self._begun = (self._begun + text).lstrip()[:LONGEST]
        return len(text)

    @property
    def told(self) -> str:
        """One sentence on what was printed; empty where nothing was."""
        if not self._begun:
            return ""
        first = self._begun.partition("\n")[0].rstrip()
        many = "a line" if self.lines <= 1 else f"{self.lines} lines"
        return f"note: the plant printed {many} while it was called, which are not shown; it began with {first!r}"
