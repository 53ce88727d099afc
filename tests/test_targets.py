"""Species and uses as people write them."""

import pandas as pd
import pytest

import energy
from energy.problems import WrongUse
from energy.targets import target_slug, targets_like

FEED = {"crude protein [% DM]": 15, "crude fat [% DM]": 3.5, "crude fibre [% DM]": 4, "ash [% DM]": 5,
        "gross energy [MJ/kg DM]": 18.5}  # fmt: skip


def table(**more):
    return pd.DataFrame({"sample_id": ["a"], **{k: [v] for k, v in (FEED | more).items()}})


@pytest.mark.parametrize("word", ["Growing pig", "growing_pig", "GROWING PIG"])
def test_capitals_and_spaces_say_nothing(word):
    assert target_slug(word) == "growing_pig"


def test_a_pig_may_be_two_things():
    assert targets_like("pig") == "Did you mean growing_pig or sow?"


def test_a_word_nobody_knows_gets_the_list():
    assert targets_like("zzz").startswith("One of: human")


def test_a_species_column_is_told_what_it_may_be():
    a = energy.assess(table(species="pig"), target="growing_pig")
    assert any("Call it 'target'" in p.cure for p in a.problems)


def test_a_dry_matter_table_cannot_be_shown_as_is():
    with pytest.raises(WrongUse, match="no sample of the table has a dry matter"):
        energy.assess(table(), target="cattle", unit="MJ/kg as is")


def test_the_laws_of_a_species_are_named():
    with pytest.raises(WrongUse) as found:
        energy.assess(table(), target="cattle", law="ec_152_2009_annex_vii")
    assert "futtmv_2010_me_compound" in found.value.cure


def test_a_law_of_one_species_does_not_stop_the_others():
    both = pd.concat([table(target="poultry"), table(target="cattle", sample_id="b")], ignore_index=True)
    found = energy.assess_each(both, law="ec_152_2009_annex_vii")
    assert found["poultry"].law == "ec_152_2009_annex_vii"
    assert found["cattle"].law is None
    assert any("computed without a law" in p.what for p in found["cattle"].problems)


def test_what_is_missing_is_dry_matter():
    """Protein and GE are given; what the NRC formula lacks is the way from dry matter to as fed."""
    a = energy.assess(table(), target="dog")
    reason = a.results.set_index("system").loc["nrc_2006_chain_dog_bomb", "reason"]
    assert reason.startswith("needs dry matter")


def test_a_missing_u_says_whose():
    """Digestibility of energy has no default u in the dictionary."""
    a = energy.assess(
        table(**{"energy digestibility [%]": 70}), target="cattle", bomb_system="ge_times_measured_digestibility"
    )
    reason = a.results.set_index("system").loc["ge_times_measured_digestibility", "reason"]
    assert "u is not known" in reason
