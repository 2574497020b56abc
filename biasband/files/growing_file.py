"""A new file that grows beside its name and takes it at the end, so that half a file never looks whole."""

from __future__ import annotations

import os
from contextlib import suppress

from biasband.errors import UsageError


class GrowingFile:
    """A new file, to be written to `stream`; `part` is its name until it is finished.

    Raises UsageError where it cannot be made.
    """

    def __init__(self, path: str) -> None:
        self.path = path
        self.part = f"{path}.{os.getpid()}.part"
        self._over = False
        try:
            self.stream = open(self.part, "xb")  # noqa: SIM115  # `finish` and `discard` close it
        except OSError as error:
            raise UsageError(f"{path} cannot be written: {error.strerror}") from None

    def finish(self) -> None:
        """Give the file its name.

        Raises: OSError where the last of it cannot be written, or FileExistsError where there is something
        at its name by now: then it stays at `part`.
        """
        self.stream.close()
        try:
            _take_name(self.part, self.path)
        except FileExistsError:
            self._over = True
            raise
        self._over = True

    def discard(self) -> None:
        """Take away what was written, unless it has been finished."""
        if not self._over:
            with suppress(OSError):
                self.stream.close()
            with suppress(OSError):
                os.unlink(self.part)


def _take_name(part: str, path: str) -> None:
    """Rename a file; what is at its new name already stays, which os.rename does not see to everywhere."""
    try:
        os.link(part, path)
    except FileExistsError:
        raise
    except OSError:  # a file system without links
        if os.path.lexists(path):
            raise FileExistsError(path) from None
        os.rename(part, path)
    else:
        os.unlink(part)
