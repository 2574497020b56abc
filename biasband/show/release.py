"""Which biasband this is."""

from __future__ import annotations

NOT_INSTALLED = "(not installed)"


def version() -> str:
    """The version of the installed package; a checkout that is not installed says so."""
    from importlib.metadata import PackageNotFoundError
    from importlib.metadata import version as installed

    try:
        return installed("biasband")
    except PackageNotFoundError:
        return NOT_INSTALLED
