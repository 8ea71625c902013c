import periodictable
import pytest

from phasedb.crystal.elements import ELEMENTS, element
from phasedb.errors import InputError


@pytest.mark.parametrize(
    "symbol", [symbol for symbol, entry in ELEMENTS.items() if entry.has_standard_weight]
)
def test_symbols_numbers_and_weights_agree_with_an_independent_table(symbol):
    # periodictable's table follows CIAAW too, but was transcribed by others
    witness = getattr(periodictable, symbol)
    assert element(symbol).atomic_number == witness.number
    assert element(symbol).weight_g_mol == pytest.approx(witness.mass, rel=2e-5)


def test_the_table_has_no_gap_and_atomic_numbers_ascend():
    numbers = [entry.atomic_number for entry in ELEMENTS.values() if entry.symbol not in "DT"]
    assert numbers == list(range(1, 104))


def test_elements_without_a_standard_weight_say_so():
    # CIAAW lists no standard weight for these: no isotope has a characteristic terrestrial abundance
    without = {symbol for symbol, entry in ELEMENTS.items() if not entry.has_standard_weight}
    assert {"Tc", "Pm", "Po", "Ra", "Ac", "Np", "Pu"} <= without
    assert not {"Bi", "Th", "Pa", "U"} & without


@pytest.mark.parametrize(("wrong", "suggested"), [("FE", "Fe"), ("co", "Co"), ("Xy", "Xe"), ("Alu", "Al")])
def test_an_unknown_symbol_is_named_with_a_suggestion(wrong, suggested):
    with pytest.raises(InputError, match=repr(wrong)) as caught:
        element(wrong)
    assert suggested in caught.value.hint
