"""Two columns that say one thing twice."""

import pandas as pd
import pytest

import energy


def told(target, protein, nitrogen, **more):
    columns = {"crude protein [% as is]": protein, "nitrogen [% as is]": nitrogen, "moisture [%]": 12,
               "crude fat [% as is]": 3, "ash [% as is]": 5, "gross energy [MJ/kg as is]": 16}  # fmt: skip
    table = pd.DataFrame({"sample_id": ["x"], **{k: [v] for k, v in (columns | more).items()}})
    return [p.what for p in energy.assess(table, target=target).problems if "times the nitrogen" in p.what]


@pytest.mark.parametrize(
    ("target", "protein", "nitrogen", "expected"),
    [
        ("growing_pig", 17.2, 2.752, 0),  # 6.25
        ("growing_pig", 15.0, 2.752, 1),  # 5.45: right for nuts, never for a feed
        ("human", 15.0, 2.752, 0),
        ("human", 15.0, 1.5, 1),  # 10: no protein
        ("human", 2.0, 15.0, 1),  # the two columns were swapped
    ],
)
def test_protein_beside_nitrogen(target, protein, nitrogen, expected):
    """Factors: 6.25 by definition of crude protein of feeds; 4.8 (cabbage) to 6.38 (milk) for foods, FAO/WHO 1973."""
    assert len(told(target, protein, nitrogen)) == expected


def test_the_factor_stated_decides():
    assert told("human", 17.2, 2.752, nitrogen_factor=5.7)[0].startswith("protein is 6.25 times")
