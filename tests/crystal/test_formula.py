import periodictable
import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.crystal.elements import ELEMENTS
from phasedb.crystal.formula import MAX_TEXT, parse_formula
from phasedb.errors import InputError

SYMBOLS = [symbol for symbol in ELEMENTS if symbol not in "DT"]


@pytest.mark.parametrize(
    ("text", "composition"),
    [
        ("NaCl", {"Na": 1, "Cl": 1}),
        ("Fe0.95O", {"Fe": 0.95, "O": 1}),
        ("Ba(NO3)2", {"Ba": 1, "N": 2, "O": 6}),
        ("(NH4)2SiF6", {"N": 2, "H": 8, "Si": 1, "F": 6}),
        ("K[Fe(CN)6]", {"K": 1, "Fe": 1, "C": 6, "N": 6}),
        ("KAl(SO4)2.12H2O", {"K": 1, "Al": 1, "S": 2, "O": 20, "H": 24}),
        ("KAl(SO4)2·12H2O", {"K": 1, "Al": 1, "S": 2, "O": 20, "H": 24}),
        ("NaAlSi2O6.H2O", {"Na": 1, "Al": 1, "Si": 2, "O": 7, "H": 2}),
        ("CaSO4 . 2H2O", {"Ca": 1, "S": 1, "O": 6, "H": 4}),
        ("CaSO4.0.5H2O", {"Ca": 1, "S": 1, "O": 4.5, "H": 1}),
        ("CuSO4*5D2O", {"Cu": 1, "S": 1, "O": 9, "D": 10}),
        ("Na0.5H2O", {"Na": 0.5, "H": 2, "O": 1}),
        ("Zr0.85Y0.15O1.925", {"Zr": 0.85, "Y": 0.15, "O": 1.925}),
        ("(Mn,Fe)2O3", {"Mn": 1, "Fe": 1, "O": 3}),
        ("(Mn0.4,Fe0.6)2O3", {"Mn": 0.8, "Fe": 1.2, "O": 3}),
        ("Ba₂TiO₄", {"Ba": 2, "Ti": 1, "O": 4}),
        ("La0.18Sr0.82Al0.59Ta0.41O3", {"La": 0.18, "Sr": 0.82, "Al": 0.59, "Ta": 0.41, "O": 3}),
    ],
)
def test_compositions(text, composition):
    formula = parse_formula(text)
    assert formula.composition == pytest.approx(composition)
    assert list(formula.elements) == list(composition)
    assert formula.atoms == pytest.approx(sum(composition.values()))


def test_what_was_read_with_a_choice_is_said():
    assert "equal shares" in parse_formula("(Mn,Fe)2O3").notes[0]
    assert parse_formula("(Mn0.4,Fe0.6)2O3").notes == ()
    assert "12 H2O" in parse_formula("KAl(SO4)2.12H2O").notes[0]


@pytest.mark.parametrize(
    ("text", "column", "words"),
    [
        ("Fe2Xy3", 4, ["'Xy'", "Xe"]),
        ("FE2O3", 2, ["'E'", "did you mean Fe"]),
        ("fe2O3", 1, ["capital"]),
        ("Fe(OH", 3, ["not closed"]),
        ("Fe)2", 3, ["not open"]),
        ("Fe0O", 3, ["above 0"]),
        ("Fe1.2.3O", 6, ["two decimal points"]),
        ("()2", 2, ["expected here"]),
        ("(Fe,)2", 5, ["expected here"]),
        ("Fe,O", 3, ["unexpected ','"]),
        ("Fe3+", 4, ["without charges"]),
        ("Fe2O3 ·", 8, ["expected here"]),
        ("Fe9999999", 3, ["not plausible"]),
        ("(" * 40 + "Fe" + ")" * 40, 14, ["deeper"]),
    ],
)
def test_errors_name_the_place_with_a_caret(text, column, words):
    with pytest.raises(InputError) as caught:
        parse_formula(text)
    place, shown, caret = caught.value.where.splitlines()
    assert place == f"column {column}:"
    assert shown.strip() == text
    assert caret.index("^") - 4 == column - 1
    assert all(word in str(caught.value) for word in words)


@pytest.mark.parametrize("text", ["", "  ", "Fe" * MAX_TEXT])
def test_empty_and_endless_texts_are_refused(text):
    with pytest.raises(InputError):
        parse_formula(text)


@given(st.text(alphabet="FeOCa0123456789.,()[]·* +-é", max_size=30))
def test_any_text_is_read_or_refused_with_our_error(text):
    try:
        formula = parse_formula(text)
    except InputError:
        return
    assert formula.molar_mass_g_mol > 0
    assert parse_formula(formula.reduced).reduced == formula.reduced


COUNTS = st.dictionaries(st.sampled_from(SYMBOLS), st.integers(1, 60), min_size=1, max_size=6)


@given(COUNTS, st.integers(1, 12), st.randoms())
def test_the_reduced_key_ignores_order_and_factor(counts, factor, random):
    text = "".join(f"{symbol}{count}" for symbol, count in counts.items())
    items = list(counts.items())
    random.shuffle(items)
    shuffled = "".join(f"{symbol}{count * factor}" for symbol, count in items)
    decimal = "".join(f"{symbol}{count / 10:.1f}" for symbol, count in items)
    assert parse_formula(text).reduced == parse_formula(shuffled).reduced == parse_formula(decimal).reduced


@given(COUNTS, st.sampled_from(SYMBOLS))
def test_the_reduced_key_tells_compositions_apart(counts, symbol):
    text = "".join(f"{name}{count}" for name, count in counts.items())
    if len(counts) > 1 or symbol not in counts:
        assert parse_formula(text).reduced != parse_formula(text + symbol).reduced


@given(COUNTS)
def test_molar_mass_agrees_with_an_independent_library(counts):
    text = "".join(
        f"{symbol}{count}" for symbol, count in counts.items() if ELEMENTS[symbol].has_standard_weight
    )
    if text:
        assert parse_formula(text).molar_mass_g_mol == pytest.approx(
            periodictable.formula(text).mass, rel=2e-5
        )


@given(
    st.lists(
        st.tuples(st.sampled_from(sorted(ELEMENTS)), st.sampled_from(["", "1", "2", "7", "12", "100"])),
        min_size=1,
        max_size=6,
    )
)
def test_plain_formulas_read_the_same_as_through_the_whole_grammar(units: list[tuple[str, str]]) -> None:
    text = "".join(symbol + count for symbol, count in units)
    plain, grammar = parse_formula(text), parse_formula(f"({text})")
    assert plain.composition == grammar.composition
    assert list(plain.composition) == list(grammar.composition)
    assert plain.reduced == grammar.reduced
    assert plain.notes == grammar.notes == ()
