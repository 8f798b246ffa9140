"""The analyst's choices that change the answer, each with its reason."""

from __future__ import annotations

from workbench.settings import Settings


def choices_of(settings: Settings) -> tuple[str, ...]:
    """Return the choices that change the answer, each with its reason: left out, swapped back, accepted."""
    told = [f"sample {sample} left out: {reason}" for sample, reason in settings.samples.exclude.items()]
    for name, block in settings.blocks.items():
        told += [f"sample {sample} left out of {name}: {reason}" for sample, reason in block.exclude.items()]
        told += [
            f"rows of {' and '.join(swap.samples)} exchanged in {name}: {swap.reason}" for swap in block.swap
        ]
    told += [f"finding {one} accepted: {reason}" for one, reason in settings.check.accept.items()]
    return tuple(told)
