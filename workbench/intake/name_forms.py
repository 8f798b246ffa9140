"""How one name is written in two tables: its words and numbers, and what may differ between the two writings."""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass
from functools import cached_property

_TOKEN = re.compile(r"(?<=\d\.)\d+|\d+|[^\W\d_]+|-$|[^\w\s.\-/\\:;,()\[\]{}|\"]")
"""A number (digits behind a decimal point apart), a word, or a mark that means something: + * ' % and so on.

Blanks, underscores, points, hyphens, slashes, colons, commas, brackets and bars only part words; a hyphen at
the end is kept, since it may be a minus.
"""

Form = tuple[str, ...]


@dataclass(frozen=True)
class WrittenName:
    """A name and its parts.

    Attributes
    ----------
    name
        As it is written.
    """

    name: str

    @cached_property
    def text(self) -> str:
        """The name in one Unicode form (NFKC), without blanks at its ends."""
        return unicodedata.normalize("NFKC", self.name).strip()

    @cached_property
    def spans(self) -> tuple[tuple[int, int], ...]:
        """Where each token stands in ``text``."""
        return tuple(found.span() for found in _TOKEN.finditer(self.text))

    @cached_property
    def parts(self) -> Form:
        """The tokens in one case, numbers without zeros before them."""
        return tuple(
            _without_zeros(self.text, start, end).casefold() if self.text[start].isdigit() else word
            for (start, end), word in zip(self.spans, self._words, strict=True)
        )

    @cached_property
    def _words(self) -> Form:
        return tuple(self.text[start:end].casefold() for start, end in self.spans)

    @cached_property
    def one_case(self) -> Form:
        """The name without case, blanks and punctuation; words that stand side by side are one."""
        return _joined(self._words)

    @cached_property
    def unpadded(self) -> Form:
        """As ``one_case``, numbers without zeros before them."""
        return _joined(self.parts)

    def written(self, start: int, end: int) -> str:
        """Return the text from one token to before another, without what parts it from its neighbours."""
        return self.text[self.spans[start][0] : self.spans[end - 1][1]] if end > start else ""

    def before(self, token: int) -> str:
        """Return the text before a token, as it is written."""
        return self.text[: self.spans[token][0]]

    def behind(self, token: int) -> str:
        """Return the text behind the token before a position, as it is written."""
        return self.text[self.spans[token - 1][1] :]


def _without_zeros(text: str, start: int, end: int) -> str:
    """Return a number without zeros before it; digits behind a decimal point keep theirs."""
    decimal = start >= 2 and text[start - 1] == "." and text[start - 2].isdigit()
    return text[start:end] if decimal else text[start:end].lstrip("0") or "0"


def _joined(tokens: Form) -> Form:
    form: list[str] = []
    for token in tokens:
        if form and token[0].isalpha() and form[-1][0].isalpha():
            form[-1] += token
        else:
            form.append(token)
    return tuple(form)


def differences(here: str, there: str) -> list[str]:
    """Return in what two writings of one name differ.

    >>> differences("s_01 ", "S1")
    ['case', 'spaces or punctuation', 'zeros before numbers']
    """
    one, other = WrittenName(here), WrittenName(there)
    told = []
    if one.text != other.text and "".join(_letters(one)) != "".join(_letters(other)):
        told.append("case")
    if _between(here) != _between(there):
        told.append("spaces or punctuation")
    if one.one_case != other.one_case and one.unpadded == other.unpadded:
        told.append("zeros before numbers")
    return told or ["the form of its letters"]


def _letters(name: WrittenName) -> list[str]:
    return [name.text[start:end] for start, end in name.spans if name.text[start].isalpha()]


def _between(name: str) -> str:
    """Return what stands around the words and numbers of a name."""
    return _TOKEN.sub("", unicodedata.normalize("NFKC", name))
