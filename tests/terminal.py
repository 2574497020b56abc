"""A terminal that keeps what is written on it."""

from __future__ import annotations


class Terminal:
    """Standard error as a program meets it on a terminal."""

    encoding = "utf-8"

    def __init__(self):
        self.text = ""

    def isatty(self):
        return True

    def write(self, text):
        self.text += text

    def flush(self):
        pass
