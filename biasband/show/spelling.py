"""How a text is spelled on an output that may not show every sign."""

from __future__ import annotations

from dataclasses import dataclass

OWN_SIGNS = "Ωµπ±°−≥≤→…βσ─│●×█▄∥"
"""The signs that our own texts use; an output that lacks one of them gets none of them."""

_IN_ASCII = str.maketrans(
    {
        "Ω": "ohm", "\u2126": "ohm", "µ": "u", "\u03bc": "u", "±": "+/-", "°": "deg", "−": "-", "–": "-",
        "≥": ">=", "≤": "<=", "→": "->", "…": "...", "σ": " sigma", "Σ": "sum", "×": "x", "─": "-",
        "∥": "||", "│": "|", "●": "o", "█": "#", "▄": ":", "π": "pi", "β": "beta",
    }
)  # fmt: skip


@dataclass(frozen=True)
class Spelling:
    """The encoding of an output, and how texts are spelled in it."""

    encoding: str = "utf-8"

    @property
    def plain(self) -> bool:
        """Whether our own signs are spelled out in ASCII ("ohm", "u", "+/-", "degC")."""
        try:
            OWN_SIGNS.encode(self.encoding)
        except UnicodeEncodeError:
            return True
        return False

    def __call__(self, text: str) -> str:
        """Spell a text on one line; what cannot be shown, control characters too, becomes a mark."""
        visible = "".join(_visible(sign) for sign in text)
        spelled = visible.translate(_IN_ASCII) if self.plain else visible
        return spelled.encode(self.encoding, "replace").decode(self.encoding)


def _visible(sign: str) -> str:
    if sign.isprintable():
        return sign
    return " " if sign.isspace() else "\ufffd"
