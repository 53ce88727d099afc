"""The dictionary's own rules."""

import pytest

from energy.catalogue.records import SOURCE_STATUS
from energy.quantities import dictionary, normal_form, synonym_index


def test_no_word_names_two_quantities():
    assert len(synonym_index()) > 150  # building the index raises on a clash


@pytest.mark.parametrize("quantity", dictionary().values(), ids=lambda q: q.name)
def test_an_entry_is_whole(quantity):
    assert quantity.range[0] < quantity.range[1]
    if quantity.default_u is not None:
        assert quantity.default_u_source
        assert quantity.default_u_status in SOURCE_STATUS


def test_symbols_are_unique():
    symbols = [q.symbol for q in dictionary().values()]
    assert len(symbols) == len(set(symbols))


@pytest.mark.parametrize(
    ("tagname", "name"),
    [("PROCNT", "crude_protein"), ("FAT", "crude_fat"), ("FIBTG", "total_dietary_fibre"), ("CHOCDF", "carbohydrate_by_difference"),
     ("CHOAVL", "available_carbohydrate"), ("CHOAVLM", "available_carbohydrate_monosaccharides"), ("WATER", "moisture"),
     ("ALC", "alcohol"), ("ASH", "ash")],
)  # fmt: skip
def test_infoods_tagnames_are_synonyms(tagname, name):
    assert synonym_index()[normal_form(tagname)] == name
