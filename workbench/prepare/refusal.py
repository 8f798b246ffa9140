"""The refusal of a table that cannot be what it is declared to be: what was seen, and the setting that mends it."""

from __future__ import annotations

from collections.abc import Sequence

from workbench.errors import InputError
from workbench.prepare.words import some
from workbench.settings.prepare_keys import toml_text

VALUES = "values"
EXCLUDE = "exclude"
TRUST = "prepare.check_values"


class PrepareRefusal(InputError):  # noqa: N818
    """A block cannot be prepared as its settings say.

    The recipe knows no block's name: ``reason`` is free of it, and :meth:`at` gives the same refusal with the name
    and the delivered file.

    Attributes
    ----------
    reason : str
        What was seen; neither block nor way out.
    key : str
        The key to change below ``[blocks.NAME]``; with a dot, in a table of its own (``prepare.drift``).
    fitting : tuple
        What the key could be instead, the likeliest first; empty when only the person knows.
    trusted_by : str
        The key which, when ``false``, takes the table as declared; empty when nothing does.
    advice : str
        A way out besides the settings, in words; empty without.
    block, file : str
        Empty until :meth:`at` has told them.

    Examples
    --------
    >>> refusal = PrepareRefusal("12 values are negative", key="values", fitting=("log",))
    >>> print(refusal.at("lipids", "source/lipids.csv"))
    block 'lipids' (source/lipids.csv): 12 values are negative; set values = "log" in [blocks.lipids] of project.toml
    """

    def __init__(
        self,
        reason: str,
        *,
        key: str,
        fitting: tuple[object, ...] = (),
        trusted_by: str = "",
        advice: str = "",
        block: str = "",
        file: str = "",
    ) -> None:
        self.reason, self.key, self.trusted_by, self.advice = reason, key, trusted_by, advice
        self.fitting, self.block, self.file = fitting, block, file
        where = f"block '{block}' ({file}): " if block else ""
        super().__init__(f"{where}{reason}; {self.way_out}")

    def at(self, block: str, file: str) -> PrepareRefusal:
        """Return the refusal of a block by name, with the file that it was delivered in."""
        return PrepareRefusal(
            self.reason,
            key=self.key,
            fitting=self.fitting,
            trusted_by=self.trusted_by,
            advice=self.advice,
            block=block,
            file=file,
        )

    @property
    def way_out(self) -> str:
        """What to change, word for word as it is written in ``project.toml``."""
        ways = [self.advice] if self.advice else []
        ways.append(self._setting())
        if self.trusted_by:
            ways.append(
                f"set {_line(self.trusted_by, 'false', self.block)} if the values are what they are said to be"
            )
        return ", or ".join(ways)

    def _setting(self) -> str:
        if not self.fitting:
            return f"look again at {_line(self.key, '', self.block)}"
        first, *others = map(toml_text, self.fitting)
        return f"set {_line(self.key, first, self.block)}" + (
            f" (or {' or '.join(others)})" if others else ""
        )


def _line(key: str, value: str, block: str) -> str:
    """Return ``key = value in [blocks.NAME...] of project.toml``."""
    *table, name = key.split(".")
    setting = f"{name} = {value}" if value else f"`{name}`"
    return f"{setting} in [{'.'.join(['blocks', block or 'NAME', *table])}] of project.toml"


def without_value(what: str, samples: Sequence[str], total: int) -> PrepareRefusal:
    """Return the refusal of samples that lack something, of a ``total`` number of samples."""
    return PrepareRefusal(
        f"{len(samples)} of {total} samples have no {what}: {some(samples)}",
        key=EXCLUDE,
        fitting=({samples[0]: "the reason"},),
    )
