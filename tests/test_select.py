"""The selection language: what it accepts, what it answers, what it says about mistakes."""

import pytest

from codesign.catalog import Filter, Led, load_catalog, select
from codesign.errors import CatalogError


def led(name, peak, **fields):
    table = {"id": name, "source": "test", "peak_nm": peak, "fwhm_nm": 20, "radiant_flux_mw": 100}
    table |= {
        "rated_current_ma": 350,
        "forward_voltage_v": 3,
        "thermal_resistance_k_per_w": 5,
        "max_junction_c": 120,
    }
    return Led.from_table({**table, **fields})


LEDS = {
    part.id: part
    for part in (
        led("blue-450-a", 450, price=1.5, tags=["blue"]),
        led("red-660-a", 660, price=2.5, tags=["red", "plant"]),
        led("nir-850-a", 850, tags=["nir"], max_current_ma=1000),
        led("nir-940-b", 940, price=0.5, tags=["nir", "cheap"], invented=True),
    )
}
FILTERS = [
    Filter.from_table({"id": "nd-03", "source": "t", "kind": "neutral", "optical_density": 0.3}),
    Filter.from_table({"id": "open", "source": "t", "kind": "none"}),
]


def ids(expression, parts=LEDS):
    return [part.id for part in select(parts, expression, allow_empty=True)]


@pytest.mark.parametrize(
    ("expression", "expected"),
    [
        ("all", ["blue-450-a", "red-660-a", "nir-850-a", "nir-940-b"]),
        ("red-660-a", ["red-660-a"]),
        ("peak_nm > 800", ["nir-850-a", "nir-940-b"]),
        ("600 <= peak_nm < 850", ["red-660-a"]),
        ("peak_nm < 500 or peak_nm >= 940", ["blue-450-a", "nir-940-b"]),
        ("not (peak_nm < 800)", ["nir-850-a", "nir-940-b"]),
        ("peak_nm in [450, 850]", ["blue-450-a", "nir-850-a"]),
        ("peak_nm not in (450, 850)", ["red-660-a", "nir-940-b"]),
        ("id == 'nir-850-a'", ["nir-850-a"]),
        ("match(id, 'nir-*')", ["nir-850-a", "nir-940-b"]),
        ("match(id, '*-a') and has(tags, 'plant')", ["red-660-a"]),
        ("'nir' in tags", ["nir-850-a", "nir-940-b"]),
        ("invented", ["nir-940-b"]),
        ("not invented and peak_nm > 800", ["nir-850-a"]),
        ("flux_w == 0.1 and max_current_ma > 350", ["nir-850-a"]),
        ("flux_temperature_coefficient_per_k > -0.5", ["blue-450-a", "red-660-a", "nir-850-a", "nir-940-b"]),
        ("peak_nm > 2000", []),
    ],
)
def test_expression_selects(expression, expected):
    assert ids(expression) == expected


@pytest.mark.parametrize("expression", ["price < 100", "price > 0", "price != 3", "price in [1.5, 2.5, 0.5]"])
def test_comparison_with_a_field_not_stated_is_false(expression):
    assert "nir-850-a" not in ids(expression)


def test_list_of_ids_and_patterns_keeps_its_own_order_without_repeats():
    assert ids(["nir-940-b", "blue-*", "nir-*"]) == ["nir-940-b", "blue-450-a", "nir-850-a"]


def test_select_takes_a_plain_sequence_of_parts():
    assert ids("kind == 'neutral' and optical_density < 1", FILTERS) == ["nd-03"]


def test_derived_fields_of_measured_parts_can_be_asked():
    catalog = load_catalog("demo")
    whites = select(catalog.leds, "has(tags, 'white') and peak_nm < 500 and flux_w > 0.1")
    assert whites and all(part.curve for part in whites)
    assert [part.id for part in select(catalog.cameras, "colour")] == ["colour-5mp"]
    assert select(catalog.cameras, "'red' in channels")
    assert select(catalog.surfaces, "sample_count >= 12")


@pytest.mark.parametrize(
    ("expression", "words"),
    [
        ("peek_nm > 800", ["unknown name 'peek_nm'", "did you mean 'peak_nm'?"]),
        ("peak_nm > 5000 and prise < 2", ["unknown name 'prise'", "did you mean 'price'?"]),
        ("peak_nm > > 5", ["cannot be read at column 11", "write e.g."]),
        ("", ["cannot be read"]),
        ("peak_nm", ["'peak_nm' is not a condition"]),
        ("peak_nm > '800'", ["compares 450.0 > '800'", "numbers with numbers"]),
        ("peak_nm + 1 > 800", ["'peak_nm + 1' is outside the selection language"]),
        ("id.upper() == 'X'", ["'id.upper()'"]),
        ("matches(id, 'x')", ["unknown name 'matches'", "did you mean 'match'?"]),
        ("match(id)", ["must be match("]),
        ("has(peak_nm, 'x')", ["holds none", "use has(tags"]),
        ("peak_nm in 5", ["cannot compare 450.0 in 5"]),
        ("id is 'x'", ["outside the selection language"]),
        ("(lambda: 1)() > 0", ["outside the selection language"]),
        ("__import__('os')", ["unknown name '__import__'"]),
        ("[x for x in tags] == 1", ["unknown name 'x'"]),
        ("peak_nm > 5000", ["selects none of 4 leds", "loosen"]),
        (["blu-450-a"], ["no led 'blu-450-a'", "did you mean 'blue-450-a'?"]),
        (["uv-*"], ["no led 'uv-*'"]),
        ([], ["selects none of 4 leds"]),
    ],
)
def test_bad_selection_gives_one_clear_line(expression, words):
    with pytest.raises(CatalogError) as caught:
        select(LEDS, expression)
    message = str(caught.value)
    assert "\n" not in message
    for word in words:
        assert word in message


def test_nothing_to_choose_from_is_said_plainly():
    with pytest.raises(CatalogError, match="selects none of 0 parts"):
        select({}, "all")
