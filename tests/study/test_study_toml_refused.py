"""study.toml with faults: each key refused at its line, with what is allowed and what was meant."""

from __future__ import annotations

from typing import Any

import pytest

from projector.study.reading import read_study
from projector.study.schema import study_json_schema


def test_limit_a_missing_key_is_named(small: Any, only_fault: Any) -> None:
    small.replace("mean_reversion = 0.03\n", "")
    assert only_fault(small).sentence() == (
        f"E202 study.toml, row {small.line('[call_model]')}, column call_model.mean_reversion: this key is missing; "
        "add it: of the short rate [1/year], -0.05 to 0.5."
    )


def test_limit_a_missing_section_is_named(small: Any, only_fault: Any) -> None:
    small.replace("[tax]\nrate = 0\n", "")
    error = only_fault(small)
    assert (error.code, error.column, error.row) == ("E202", "tax", None)


def test_limit_an_unknown_key_is_paired_with_the_missing_one(small: Any, only_fault: Any) -> None:
    small.replace("months = 24", "monts = 24")
    assert only_fault(small).sentence() == (
        f"E203 study.toml, row {small.line('monts')}, column horizon.monts: this key is unknown (found '24'); "
        "did you mean months? That key is missing."
    )


def test_limit_an_unknown_section_says_what_was_meant(small: Any, only_fault: Any) -> None:
    small.replace("[investment_expense]", "[investment_expenses]")
    error = only_fault(small)
    assert (error.code, error.row) == ("E203", small.line("[investment_expenses]"))
    assert error.remedy == "did you mean investment_expense? That key is missing"


def test_limit_an_unknown_key_of_its_own_is_refused(small: Any, only_fault: Any) -> None:
    small.replace("npv_constant_bp = 0", "npv_constant_bp = 0\nxyzzy = true")
    error = only_fault(small)
    assert (error.code, error.column, error.value) == ("E203", "discounting.xyzzy", "true")
    assert error.remedy == "remove it; the keys here are source, as_of, rationale, npv_constant_bp"


VALUES = [
    ("normal_volatility = 0.0095", "normal_volatility = 0.95", "E205", "call_model.normal_volatility"),
    ("normal_volatility = 0.0095", 'normal_volatility = "0.0095"', "E204", "call_model.normal_volatility"),
    ("normal_volatility = 0.0095", "normal_volatility = true", "E204", "call_model.normal_volatility"),
    ("normal_volatility = 0.0095", "normal_volatility = nan", "E207", "call_model.normal_volatility"),
    ("normal_volatility = 0.0095", "normal_volatility = 1e400", "E207", "call_model.normal_volatility"),
    ("limit = 0\n", f"limit = 1{'0' * 400}\n", "E205", "criterion.limit"),
    ("months = 24", "months = 25", "E205", "horizon.months"),
    ("months = 24", "months = 24.0", "E204", "horizon.months"),
    ('measure = "statement_surplus"', 'measure = "statement_surplsu"', "E206", "criterion.measure"),
    ("fixed_on = 2023-01-20", 'fixed_on = "2023-01-20"', "E204", "criterion.fixed_on"),
    ("fixed_on = 2023-01-20", "fixed_on = 2023-01-20T10:00:00", "E204", "criterion.fixed_on"),
    ("valuation_date = 2022-12-31", "valuation_date = 2022-12-30", "E209", "study.valuation_date"),
    ("information_date = 2023-02-10", "information_date = 2022-12-30", "E209", "study.information_date"),
    ('currency = "USD"', 'currency = "dollars"', "E210", "study.currency"),
    ('company = "Invented Life"', 'company = ""', "E210", "study.company"),
    ('company = "Invented Life"', 'company = "In\\u0007vented"', "E210", "study.company"),
    ('company = "Invented Life"', f'company = "{"x" * 201}"', "E210", "study.company"),
    ('company = "Invented Life"', 'company = ["a"]', "E204", "study.company"),
    ('name = "annuities"', 'name = "Annuities!"', "E210", "segments 1.name"),
    ('rating = "BBB"', 'rating = "BBB=="', "E206", "purchases.classes 2.rating"),
    ("weight = 0.6", "weight = 0.5", "E209", "purchases.classes"),
    ('name = "BBB 10 years"', 'name = "A 5 years"', "E209", "purchases.classes 2.name"),
    ("recovery_lag_months = 0", "recovery_lag_months = 6", "E209", "defaults.recovery_lag_months"),
    ('refunding = "class_plus_concession"', 'refunding = "valuation"', "E209", "spreads.concession_bp"),
    ('floor = "shift"\n', "", "E202", "rates.paths 1.floor"),
    ('floor = "shift"\n', 'floor = "shift"\nreplay = "a"\n', "E203", "rates.paths 1.replay"),
    ('kind = "seven_deterministic"', 'kind = "seven"', "E206", "rates.paths 1"),
    ("rate_insensitive_blocks = [", 'scenario_set_digest = "abc"\nrate_insensitive_blocks = [', "E210", None),
    ("[texts]", "[numerics]\nblock_paths = 100\n[texts]", "E205", "numerics.block_paths"),
    ("interest_maintenance_reserve = 0", "interest_maintenance_reserve = -5000.0", "E508", None),
    (
        "asset_valuation_reserve = 0",
        "asset_valuation_reserve = 10",
        "E509",
        "maintenance_reserve.asset_valuation_reserve",
    ),
    ("[tax]\nrate = 0", "[tax]\nrate = 0.21", "E510", "tax.rate"),
    ('rule = "optimal_with_cost"', 'rule = "never"', "E511", "call_model.rule"),
    ('rule = "optimal_with_cost"', 'rule = "optimal_with_costs"', "E206", "call_model.rule"),
]


@pytest.mark.parametrize(("old", "new", "code", "key"), VALUES)
def test_limit_a_bad_value_is_refused_at_its_key(
    small: Any, only_fault: Any, old: str, new: str, code: str, key: str | None
) -> None:
    error = only_fault(small.replace(old, new))
    assert error.file == "study.toml"
    assert error.code == code
    assert key is None or error.column == key
    assert error.row is not None


def test_limit_percent_for_decimal_reads_as_a_sentence(small: Any, only_fault: Any) -> None:
    small.replace("normal_volatility = 0.0095", "normal_volatility = 0.95")
    assert only_fault(small).sentence() == (
        f"E205 study.toml, row {small.line('normal_vol')}, column call_model.normal_volatility: this number is out of "
        "range (found '0.95'); allowed is at most 0.05 (0.01 is 100 bp a year [1/year], 0 to 0.05); "
        "did you mean 0.0095, which is 0.95 %."
    )


def test_limit_a_choice_reads_as_a_sentence(small: Any, only_fault: Any) -> None:
    small.replace('asset_close_out = "market_value"', 'asset_close_out = "market"')
    assert only_fault(small).sentence() == (
        f"E206 study.toml, row {small.line('asset_close_out')}, column horizon.asset_close_out: this is none of the "
        "choices (found 'market'); did you mean market_value? Allowed are market_value, statement_value."
    )


def test_limit_an_interest_maintenance_reserve_reads_as_a_sentence(small: Any, only_fault: Any) -> None:
    small.replace("interest_maintenance_reserve = 0", "interest_maintenance_reserve = 125000")
    assert only_fault(small).sentence() == (
        f"E508 study.toml, row {small.line('interest_maint')}, "
        "column maintenance_reserve.interest_maintenance_reserve: an interest maintenance reserve is not honoured "
        "by this version (found '125000.0'); write 0 only when that is the amount; otherwise another tool is needed."
    )


def test_limit_every_fault_of_the_file_is_told_at_once(small: Any, faults: Any) -> None:
    small.replace("mean_reversion = 0.03", "mean_reversion = 3").replace("months = 24", "monts = 24")
    small.replace("cash = 1_000.5", "cash = -1").replace('securities = "securities.csv"', 'securities = "s.csv"')
    assert [error.code for error in faults(small)] == ["E205", "E205", "E203", "E102"]


def test_limit_whole_numbers_stand_for_decimals(small: Any) -> None:
    study, _ = read_study(small.replace("concession_bp = 10", "concession_bp = 12").write())
    assert study.spreads.concession_bp == 12.0
    assert isinstance(study.spreads.concession_bp, float)


@pytest.mark.parametrize(
    ("text", "code", "row"),
    [
        ("[study]\nname = \n", "E201", 2),
        ("a = 2022-02-31\n", "E201", 1),
        ("a = 1\na = 2\n", "E201", 2),
        (f"a = {'[' * 100_000}", "E208", 1),
        (f"\n{'.'.join(['a'] * 5_000)} = 1", "E208", 2),
        (f"\n\n[{' . '.join(['a'] * 100_000)}]", "E208", 3),
        ("[[" + ".".join(['"a"', "'b'"] * 400) + "]]", "E208", 1),
        (f"a = {{{'.'.join(['a'] * 22)} = 1}}", "E208", 1),
        (f"a = {'9' * 5_000}", "E201", None),
    ],
)
def test_limit_broken_toml_is_located(small: Any, only_fault: Any, text: str, code: str, row: int | None) -> None:
    small.toml = text
    error = only_fault(small)
    assert (error.code, error.file, error.row) == (code, "study.toml", row)


def test_limit_an_empty_file_asks_for_every_section(small: Any, faults: Any) -> None:
    small.toml = ""
    found = faults(small)
    assert {error.code for error in found} == {"E202"}
    assert len(found) == 16


def test_limit_bytes_that_are_not_text_are_located(small: Any) -> None:
    from projector.study.errors import StudyRefused

    folder = small.write()
    (folder / "study.toml").write_bytes(b'[study]\nname = "caf\xe9"\n')
    with pytest.raises(StudyRefused) as refusal:
        read_study(folder)
    assert str(refusal.value) == "E201 study.toml, row 2: the file is not UTF-8 text; save it as UTF-8."


def test_order_the_lines_of_keys_survive_texts_that_look_like_keys(small: Any, only_fault: Any) -> None:
    small.replace('notes = ["Invented data."]', 'notes = ["""\n[tax]\nrate = 5\n"""]\nmaterialty = "x"')
    error = only_fault(small)
    assert (error.code, error.column, error.row) == ("E203", "texts.materialty", small.line("materialty"))


def test_limit_dots_and_brackets_in_texts_and_comments_do_not_count(small: Any) -> None:
    dots = "." * 200 + "[" * 30
    texts = f"""["{dots}\\"{dots}", '{dots}', \"\"\"{dots}\n"{dots}\"\"\"\"]  # {dots}"""
    study, _ = read_study(small.replace('["Invented data."]', texts).write())
    assert study.texts.notes[1] == dots


def test_limit_deep_keys_are_refused_at_once(small: Any, only_fault: Any) -> None:
    for text in ("a." * 400_000 + "a = 1", 'a = """' + '\\"""' * 200_000, "'" * 900_000):
        small.toml = text
        assert only_fault(small).code in ("E208", "E201")


def test_order_missing_keys_come_in_the_order_of_the_form(small: Any, faults: Any) -> None:
    from projector.study.schema import StudyForm

    small.toml = ""
    needed = [name for name, field in StudyForm.model_fields.items() if field.is_required()]
    assert [error.column for error in faults(small)] == needed


def test_limit_more_than_200_segments_are_refused(small: Any, only_fault: Any) -> None:
    more = "".join(f'[[segments]]\nname = "s{at}"\ntitle = "S"\ncash = 0\n' for at in range(200))
    error = only_fault(small.replace("[call_model]\n", f"{more}\n[call_model]\n"))
    assert (error.code, error.column) == ("E205", "segments")
    assert error.sentence().endswith("this list has 201 entries; write at most 200.")


@pytest.mark.parametrize(
    ("key", "old", "refused", "taken"),
    [
        ("residual_fade_years", "0", ("1e-300", "0.05", "0.0833"), ("0.084", "1", "0.0")),
        ("normal_volatility", "0.0095", ("5e-324", "1e-9", "9.9e-7"), ("1e-6", "0", "0.01")),
    ],
)
def test_limit_numbers_next_to_nothing_are_refused(
    small: Any, only_fault: Any, key: str, old: str, refused: tuple[str, ...], taken: tuple[str, ...]
) -> None:
    small.replace(f"{key} = {old}\n", f"{key} = @\n")
    whole = small.toml
    for value in refused:
        small.toml = whole.replace("@", value)
        error = only_fault(small)
        assert (error.code, error.column.split(".")[1]) == ("E205", key)
        assert error.problem == "this number is too small to mean anything but 0"
    for value in taken:
        small.toml = whole.replace("@", value)
        read_study(small.write())


def test_pinned_the_json_schema_knows_every_section() -> None:
    schema = study_json_schema()
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    assert schema["additionalProperties"] is False
    assert len(schema["required"]) == 16
    assert schema["$defs"]["HorizonSection"]["properties"]["months"]["multipleOf"] == 12
