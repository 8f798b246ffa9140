"""How many exchanged pairs the search for swapped samples finds, and how many clean studies it accuses.

Studies of 3,000 transcript counts and 250 metabolite intensities with private factors, prepared by their
recipes. Families of studies with one exchanged pair in the metabolites: 3 to 5 shared factors; with two
groups and three run days, or with neither. Families without: the same, and studies with much private
variation, heavy tails, nothing shared, strong group effects, a third layer, an odd sample. One line for each
family and n: pairs found, other pairs accused, in which layer; clean studies accused, rows told to match nobody.

Run: python tests/benchmarks/swaps.py [--n 24 40 60 96] [--seeds 0 20] [--families NAME ...] [--kinds clean]
[--jobs 2]; --speed instead prints seconds, --oracle what a yardstick finds that knows which features share what.

Measured (seeds 0 to 19 of each of six families, 3 to 5 factors with groups and days or neither), pairs found and clean
studies accused: n = 24, strength 1.4: 101 of 120 (across run days 17 of 18, within a day 34 of 42, no design 50 of 60),
2 of 120; n = 40, strength 1.4: 118 of 120, 6 of 120; n = 60, strength 1.0: 117 of 120, 5 of 120. Eleven other clean
families at n = 24, seeds 0 to 9: 6 of 110 accused, none more than 1 of 10. Together 19 of 470 clean studies (4.0 %).
Other pairs than the exchanged one: 4, 5 and 2 of 120. An earlier version at n = 24 found 28 of 69 at strength 1.0.

The oracle at n = 24, 20 seeds of each of six families: strength 1.4 115 of 120, strength 1.0 118 of 120. What two
exchanged tubes tell is there even in two dozen samples; what is lacking is knowing which features share what, learnt
from 22 samples under five and three private factors (at strength 1.0 most of all).

All checks together, one processor thread (processor seconds): n = 60 x (3,000 + 250) 2 to 3 s, n = 300 12 to 16 s.
"""

from __future__ import annotations

import argparse
import sys
import time
from collections import Counter
from collections.abc import Iterator
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from simulated import Design, Study, metabolites, proteins, simulate, transcripts
from swap_oracle import oracle_finds
from swap_studies import crosses, exchanged, found_in, swap_layers

from workbench.engine.swaps.swap_layers import SwapLayer
from workbench.engine.swaps.swapped_samples import find_swapped_samples

NO_DESIGN: dict[str, Any] = {"groups": (), "run_days": 1}
PRIVATE = (
    transcripts(private_factors=8, private_strength=1.8),
    metabolites(private_factors=5, private_strength=1.8),
)
HEAVY = (transcripts(tails=4.0), metabolites(tails=4.0))
EFFECTS = (transcripts(group_effect=1.5), metabolites(group_effect=1.5))
ODD = (transcripts(), metabolites(odd=1))
THREE = (transcripts(), metabolites(), proteins())
TANGLED = {"blocks": EFFECTS, "tangle": 1.0, "run_days": 2}

SWAPPED: dict[str, dict[str, Any]] = {
    f"{factors} factors, {place}, strength {strength}": {
        "modules": factors,
        "strength": strength,
        **({} if place == "groups and days" else NO_DESIGN),
    }
    for strength in (1.0, 1.4, 2.0)
    for factors in (3, 4, 5)
    for place in ("groups and days", "no design")
}
CLEAN: dict[str, dict[str, Any]] = {
    "much private variation": {"blocks": PRIVATE},
    "heavy tails": {"blocks": HEAVY},
    "heavy tails, no design": {"blocks": HEAVY, **NO_DESIGN},
    "nothing shared": {"modules": 0},
    "nothing shared, no design": {"modules": 0, **NO_DESIGN},
    "group effects": {"blocks": EFFECTS},
    "an odd sample": {"blocks": ODD},
    "three odd samples in both": {"odd": 3},
    "three layers": {"blocks": THREE},
    "tangled days, not named": TANGLED,
    "run days, not named": {},
}

Job = tuple[str, int, int, bool]


def design_of(family: str, n: int, swapped: bool) -> Design:
    """Return the design of a family's studies."""
    design = Design(n=n, **{**SWAPPED, **CLEAN}[family])
    return design.with_block("metabolites", swaps=(2,)) if swapped else design


def layers_of(family: str, study: Study) -> list[SwapLayer]:
    """Return a study's layers, with the run days in the settings or without."""
    return swap_layers(study, named="not named" not in family)


def search(job: Job) -> tuple[Job, Counter[str]]:
    """Search one study; return what came of it, counted."""
    family, n, seed, swapped = job
    study = simulate(design_of(family, n, swapped), seed)
    found = find_swapped_samples(layers_of(family, study), random_state=seed)
    counts: Counter[str] = Counter(strangers=len(found.strangers), untestable=not found.testable)
    if not swapped:
        return job, counts + Counter(clean=1, accused=bool(found.swaps))
    (truth,) = exchanged(study)
    counts += Counter(swapped=1, found=truth in found_in(found), other=len(found_in(found) - {truth}))
    across = crosses(study, truth).replace(" ", "_")
    counts += Counter({f"of_{across}": 1, f"in_{across}": truth in found_in(found)})
    for swap in found.swaps:
        if frozenset(swap.samples) == truth:
            told = len(swap.layers) == 1
            counts += Counter(right=told and swap.layers[0] == "metabolites")
            counts += Counter(wrong=told and swap.layers[0] != "metabolites")
    return job, counts


def ask_oracle(job: Job) -> tuple[Job, Counter[str]]:
    """Return whether the oracle finds the pair, counted as :func:`search` does."""
    family, n, seed, _ = job
    study = simulate(design_of(family, n, True), seed)
    (truth,) = exchanged(study)
    found = oracle_finds(study, layers_of(family, study), seed)
    across = crosses(study, truth).replace(" ", "_")
    counts = Counter(swapped=1, found=int(found == truth), other=int(found not in (None, truth)))
    return job, counts + Counter({f"of_{across}": 1, f"in_{across}": int(found == truth)})


def line(family: str, n: int, counts: Counter[str]) -> str:
    """Return one line of the table."""
    parts = [f"{family:<44} n {n:>3}"]
    if counts["swapped"]:
        parts.append(f"found {counts['found']:>3}/{counts['swapped']:<3} other pairs {counts['other']:>2}")
        parts.append(f"layer told right {counts['right']:>2} wrong {counts['wrong']}")
        across = sorted(key[3:] for key in counts if key.startswith("of_"))
        parts.append(" ".join(f"{key}:{counts[f'in_{key}']}/{counts[f'of_{key}']}" for key in across))
    if counts["clean"]:
        parts.append(f"clean accused {counts['accused']:>2}/{counts['clean']}")
    return "  ".join([*parts, f"match nobody {counts['strangers']}", f"untestable {counts['untestable']}"])


def jobs_of(
    families: list[str], sizes: list[int], seeds: range, kinds: str
) -> Iterator[tuple[str, int, list[Job]]]:
    """Yield each family and n with its studies."""
    for n in sizes:
        for family in families:
            wanted = [kind for kind in (True, False) if kinds in ("both", "swapped" if kind else "clean")]
            own = [kind for kind in wanted if not kind or family in SWAPPED]
            yield family, n, [(family, n, seed, kind) for seed in seeds for kind in own]


def speed() -> None:
    """Print the seconds that one search takes."""
    for n in (60, 300):
        for swapped in (False, True):
            layers = swap_layers(
                simulate(design_of("4 factors, groups and days, strength 1.0", n, swapped), 1)
            )
            start, used = time.perf_counter(), time.process_time()
            find_swapped_samples(layers)
            print(
                f"n {n:>3} x (3,000 + 250), {'one pair exchanged' if swapped else 'clean':<18} "
                f"{time.perf_counter() - start:5.1f} s, processor {time.process_time() - used:5.1f} s"
            )


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--n", type=int, nargs="+", default=[24, 40, 60, 96])
    parser.add_argument("--seeds", type=int, nargs=2, default=[0, 20])
    parser.add_argument("--families", nargs="+", default=[*SWAPPED, *CLEAN])
    parser.add_argument("--jobs", type=int, default=1)
    parser.add_argument("--kinds", choices=("both", "swapped", "clean"), default="both")
    parser.add_argument("--oracle", action="store_true")
    parser.add_argument("--speed", action="store_true")
    chosen = parser.parse_args()
    if chosen.speed:
        return speed()
    total: Counter[str] = Counter()
    work = ask_oracle if chosen.oracle else search
    with ProcessPoolExecutor(chosen.jobs) as pool:
        kinds = "swapped" if chosen.oracle else chosen.kinds
        for family, n, jobs in jobs_of(chosen.families, chosen.n, range(*chosen.seeds), kinds):
            counts = sum((one for _, one in pool.map(work, jobs)), Counter[str]())
            if not counts:
                continue
            total += counts
            print(line(family, n, counts), flush=True)
    print(line("all", 0, total))
    return None


if __name__ == "__main__":
    main()
