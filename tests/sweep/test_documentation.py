"""The generated files: config/README.md says everything, the JSON Schema agrees with the program."""

import json
import re
from pathlib import Path
from typing import Any

import pytest
import yaml
from hypothesis import given, settings
from jsonschema import Draft202012Validator

from conetone.errors import SweepError
from conetone.run.workflow import DEFAULT_RESULTS, RESULTS_KEY
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.documentation import REQUIRED_FIELDS, documents, example, main, readme, schema
from conetone.sweep.fields import ENSEMBLE_FIELDS, INNER_FIELDS, SweepFields, allowed_in_words, by_file_name
from conetone.sweep.reading import read_yaml
from tests.sweep.corpus import (
    CLONE,
    INVALID,
    VALID,
    complete_sweep,
    damaged_sweeps,
    expectation,
    varied_sweeps,
)

README = Path("config/README.md")
SCHEMA = Path("workflow/schemas/sweep.schema.json")


def _validator() -> Draft202012Validator:
    return Draft202012Validator(json.loads((CLONE / SCHEMA).read_text()))


def _read(path: Path) -> Any:
    """The values of an invalid file, or SweepError where it is the YAML that is wrong."""
    try:
        return read_yaml(path)
    except SweepError as error:
        return error


STRUCTURAL = [path for path in INVALID if expectation(path).schema]
SEMANTIC = [
    path for path in INVALID if not expectation(path).schema and not isinstance(_read(path), SweepError)
]


def test_the_committed_files_are_the_generated_ones(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--check"]) == 0
    assert capsys.readouterr() == ("", "")
    assert set(documents()) == {README, SCHEMA}
    assert json.loads((CLONE / SCHEMA).read_text()) == schema()


def test_check_names_what_is_out_of_date_and_writes_nothing(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["--check"], tmp_path) == 1
    assert [line.split()[0] for line in capsys.readouterr().err.splitlines()] == [str(README), str(SCHEMA)]
    assert list(tmp_path.iterdir()) == []

    assert main([], tmp_path) == 0
    assert capsys.readouterr().out == f"wrote {README}\nwrote {SCHEMA}\n"
    assert main(["--check"], tmp_path) == 0
    assert (tmp_path / README).read_bytes() == (CLONE / README).read_bytes()

    (tmp_path / README).write_text("old\n")
    assert main(["--check"], tmp_path) == 1
    assert capsys.readouterr().err.startswith(f"{README} is out of date; run `python -m conetone")
    assert (tmp_path / README).read_text() == "old\n"
    assert main([], tmp_path) == 0
    assert capsys.readouterr().out == f"wrote {README}\n"


def test_the_schema_is_one_of_draft_2020_12_without_private_keywords() -> None:
    Draft202012Validator.check_schema(schema())
    assert schema()["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    assert schema()["title"] == "conetone sweep"
    assert schema()["description"]
    known = {
        "$schema", "$ref", "$defs", "title", "description", "type", "properties", "required", "items",
        "anyOf", "oneOf", "enum", "const", "default", "pattern", "maxLength", "minItems", "maxItems",
        "minimum", "maximum", "exclusiveMinimum", "additionalProperties",
    }  # fmt: skip

    def keywords(node: Any) -> set[str]:
        if not isinstance(node, dict):
            return set().union(*map(keywords, node)) if isinstance(node, list) else set()
        named = [inner for key in ("properties", "$defs") for inner in node.get(key, {}).values()]
        others = [inner for key, inner in node.items() if key not in ("properties", "$defs", "default")]
        return set(node).union(*map(keywords, named + others))

    assert keywords(schema()) <= known


def test_every_property_of_the_schema_is_described() -> None:
    nodes = [schema(), *schema()["$defs"].values()]
    properties = [(name, inner) for node in nodes for name, inner in node["properties"].items()]
    assert len(properties) == 10 + 2 + 4 + 7 + 2 + 5
    assert all("; allowed: " in inner["description"] for _, inner in properties)


@pytest.mark.parametrize("path", [*VALID, CLONE / "config/first-look.yaml"], ids=lambda path: path.stem)
def test_the_schema_accepts_every_valid_file(path: Path) -> None:
    _validator().validate(yaml.safe_load(path.read_text(encoding="utf-8-sig")))


@pytest.mark.parametrize("path", STRUCTURAL, ids=lambda path: path.stem)
def test_the_schema_refuses_structural_faults(path: Path) -> None:
    assert not _validator().is_valid(yaml.safe_load(path.read_text()))


@pytest.mark.parametrize("path", SEMANTIC, ids=lambda path: path.stem)
def test_the_faults_that_are_not_marked_are_beyond_a_schema(path: Path) -> None:
    _validator().validate(yaml.safe_load(path.read_text()))


def test_both_kinds_of_faults_are_many() -> None:
    assert len(STRUCTURAL) >= 70
    assert len(SEMANTIC) >= 20


@settings(max_examples=300, deadline=None)
@given(damaged_sweeps() | varied_sweeps())
def test_the_schema_accepts_whatever_the_program_accepts(values: dict[Any, Any]) -> None:
    try:
        resolve_sweep(values)
    except SweepError:
        return
    _validator().validate(values)


@pytest.mark.parametrize(
    ("mapping", "field", "single"),
    [
        ((), "sizes", 64),
        ((), "replicates", 2),
        (("ensembles", 0), "dimension", 2),
        (("operators", 0), "part", "symmetric"),
        (("windows",), "from", "n^0.25"),
        (("windows",), "to", "n^0.75"),
        (("windows",), "models", "power"),
        (("extrapolation",), "omegas", 1),
    ],
)
def test_the_schema_takes_a_single_value_for_a_list_and_no_empty_list(
    mapping: tuple[Any, ...], field: str, single: Any
) -> None:
    for value, accepted in (
        (single, True),
        ([single], True),
        ([], False),
        ([[single]], False),
        (None, False),
    ):
        values = inner = complete_sweep()
        for step in mapping:
            inner = inner[step]
        inner[field] = value
        assert _validator().is_valid(values) is accepted


def test_the_example_loads_and_its_optional_fields_are_the_defaults() -> None:
    assert f"```yaml\n{example()}```" in readme()
    assert set(yaml.safe_load(example())) == set(SweepFields.model_fields)
    resolved = resolve_sweep(yaml.safe_load(example()))
    assert resolved == resolve_sweep(yaml.safe_load(REQUIRED_FIELDS))
    assert len(resolved.choices) == 4 + 1 + 1
    assert "6 × 2" in readme()


def _tables() -> list[list[list[str]]]:
    """Rows of the README's tables, cells split as Markdown splits them: at pipes without a backslash."""
    blocks = re.findall(r"(?:^\|.*\|\n)+", readme(), flags=re.MULTILINE)
    return [[re.split(r"(?<!\\)\|", row)[1:-1] for row in block.splitlines()] for block in blocks]


def test_the_tables_of_the_readme_are_well_formed() -> None:
    tables = _tables()
    assert len(tables) == 2 + len(INNER_FIELDS)
    for head, rule, *rows in tables:
        assert all(cell == " --- " for cell in rule)
        assert rows
        assert all(len(row) == len(head) == len(rule) for row in rows)
        assert all(cell.strip() for row in rows for cell in row)


def test_the_readme_tells_meaning_range_and_default_of_every_field() -> None:
    rows = ["|".join(row).replace(r"\|", "|") for table in _tables() for row in table]
    mappings = [SweepFields, *INNER_FIELDS.values()]
    for name, field in ((n, f) for mapping in mappings for n, f in by_file_name(mapping).items()):
        about = [row for row in rows if re.match(rf" \[?`{name}`", row) and str(field.description) in row]
        assert len(about) == 1, name
        assert allowed_in_words(field)
        assert allowed_in_words(field) in about[0]
        assert about[0].endswith(" required ") is field.is_required()


def test_the_readme_tells_parameters_meaning_and_source_of_every_ensemble() -> None:
    rows = ["|".join(row) for table in _tables() for row in table]
    for name, ensemble in ENSEMBLES.items():
        (row,) = [row for row in rows if row.startswith(f" `{name}` ")]
        assert ensemble.meaning in row
        assert ensemble.source in row
        assert set(ENSEMBLE_FIELDS[name].model_fields) == {"ensemble", *(p.name for p in ensemble.parameters)}
        for parameter in ensemble.parameters:
            assert f"`{parameter.name}`: {parameter.meaning}" in row
            assert f"from {parameter.minimum} to {parameter.maximum}" in row


def test_the_links_of_the_readme_lead_to_its_headings() -> None:
    links = re.findall(r"\]\(#([^)]+)\)", readme())
    headings = re.findall(r"^#+ `?([^`\n]+)`?$", readme(), flags=re.MULTILINE)
    assert set(links) == {"ensembles", *INNER_FIELDS}
    assert set(links) <= set(headings)


def test_the_readme_names_the_results_folder_as_the_workflow_does() -> None:
    assert f"--config {RESULTS_KEY}=DIR" in readme()
    assert f"`{DEFAULT_RESULTS}/<sweep>/`" in readme()
