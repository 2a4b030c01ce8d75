from __future__ import annotations

import copy
import json

import numpy as np
import pytest

from tests.require import require
from tests.toys import selected, toy_table
from toprecon.errors import StudyError
from toprecon.migration import MigrationOptions, accumulate, write_hepdata

# Rules of the HEPData submission documentation and its JSON schema 1.1.1 (draft 7),
# written down again in our own words.
HEADER = {
    "type": "object",
    "required": ["name"],
    "additionalProperties": False,
    "properties": {"name": {"type": "string"}, "units": {"type": "string"}},
}
NUMBER_OR_TEXT = {"type": ["number", "string"]}
BIN = {
    "anyOf": [
        {"required": ["value"], "not": {"anyOf": [{"required": ["low"]}]}},
        {"required": ["low", "high"]},
    ],
    "type": "object",
    "additionalProperties": False,
    "properties": {
        "value": NUMBER_OR_TEXT,
        "low": {"type": "number"},
        "high": {"type": "number"},
    },
}
ERROR = {
    "type": "object",
    "additionalProperties": False,
    "properties": {
        "symerror": NUMBER_OR_TEXT,
        "asymerror": {
            "type": "object",
            "required": ["plus", "minus"],
            "additionalProperties": False,
            "properties": {"plus": NUMBER_OR_TEXT, "minus": NUMBER_OR_TEXT},
        },
        "label": {"type": "string"},
    },
    "oneOf": [{"required": ["symerror"]}, {"required": ["asymerror"]}],
}
VALUE = {
    "type": "object",
    "required": ["value"],
    "additionalProperties": False,
    "properties": {
        "value": NUMBER_OR_TEXT,
        "errors": {"type": "array", "minItems": 1, "items": ERROR},
    },
}


def variables(item):
    return {
        "type": "array",
        "items": {
            "type": "object",
            "required": ["header", "values"],
            "additionalProperties": False,
            "properties": {
                "header": HEADER,
                "values": {"type": "array", "items": item},
                "qualifiers": {"type": "array"},
            },
        },
    }


TABLE = {
    "type": "object",
    "required": ["independent_variables", "dependent_variables"],
    "additionalProperties": False,
    "properties": {
        "independent_variables": variables(BIN),
        "dependent_variables": variables(VALUE),
    },
}
ENTRY = {
    "type": "object",
    "required": ["name", "description", "keywords", "data_file"],
    "properties": {
        "name": {"type": "string", "maxLength": 64},
        "description": {"type": "string"},
        "keywords": {
            "type": "array",
            "items": {
                "type": "object",
                "required": ["name", "values"],
                "additionalProperties": False,
                "properties": {
                    "name": {
                        "enum": ["cmenergies", "observables", "reactions", "phrases"]
                    },
                    "values": {
                        "type": "array",
                        "items": {"type": ["string", "number"], "maxLength": 128},
                    },
                },
            },
        },
        "data_file": {"type": "string"},
        "location": {"type": "string", "maxLength": 256},
        "data_license": {"type": "object", "required": ["name", "url"]},
        "additional_resources": {"type": "array"},
        "related_to_table_dois": {"type": "array"},
    },
    "additionalProperties": False,
}


def check_table(data):
    """Validate a table, including the rules that a schema cannot express."""
    require("jsonschema").validate(
        data, TABLE, cls=require("jsonschema").Draft7Validator
    )
    lengths = {
        len(variable["values"])
        for kind in ("independent_variables", "dependent_variables")
        for variable in data[kind]
    }
    assert len(lengths) == 1
    for variable in data["dependent_variables"]:
        for value in variable["values"]:
            errors = [e["symerror"] for e in value.get("errors", [])]
            assert not errors or any(e != 0 for e in errors)  # all-zero is rejected
            assert value["value"] != "-" or not errors


def submission(folder):
    text = (folder / "submission.yaml").read_text(encoding="utf-8")
    assert not text.rstrip().endswith("---")
    return [json.loads(part) for part in text.split("\n---\n")]


def matrix(**settings):
    table = toy_table(700, seed=4, loss=0.3, wrong_b=0.3, background=0.1)
    return accumulate(
        table, selected(table), table["weight"], MigrationOptions(**settings)
    )


@pytest.fixture
def folder(tmp_path):
    return write_hepdata(
        matrix(), tmp_path / "hepdata", sqrt_s=500.0, comment="tree level"
    )


def test_every_file_follows_the_rules(folder):
    first, *entries = submission(folder)
    assert first == {"comment": "tree level"}
    for entry in entries:
        require("jsonschema").validate(entry, ENTRY)
        check_table(json.loads((folder / entry["data_file"]).read_text()))
    listed = {entry["data_file"] for entry in entries}
    assert {p.name for p in folder.iterdir()} == {*listed, "submission.yaml"}
    assert len({entry["name"] for entry in entries}) == len(entries)
    assert entries[0]["keywords"][-1] == {"name": "cmenergies", "values": [500.0]}


def test_the_files_are_yaml(folder):
    yaml = require("yaml")
    text = (folder / "submission.yaml").read_text()
    assert list(yaml.safe_load_all(text)) == submission(folder)
    for path in folder.glob("*.yaml"):
        if path.name != "submission.yaml":
            assert yaml.safe_load(path.read_text()) == json.loads(path.read_text())


def test_the_tables_hold_the_matrix_bit_for_bit(folder):
    m = matrix()
    tables = {
        entry["name"]: json.loads((folder / entry["data_file"]).read_text())
        for entry in submission(folder)[1:]
    }

    def values(name):
        (variable,) = tables[name]["dependent_variables"]
        return [float(v["value"]) for v in variable["values"]]

    def errors(name):
        (variable,) = tables[name]["dependent_variables"]
        return [
            v.get("errors", [{"symerror": 0}])[0]["symerror"]
            for v in variable["values"]
        ]

    assert values("Counts") == m.counts.ravel().tolist()
    assert errors("Counts") == np.sqrt(m.counts_variances).ravel().tolist()
    assert values("Response") == m.response.ravel().tolist()
    assert values("Generated") == m.generated.tolist()
    assert values("Missed") == m.missed.tolist()
    assert values("From outside") == m.from_outside.tolist()
    assert values("Background") == m.background.tolist()
    assert values("Efficiency") == m.efficiency.tolist()
    true, reco = tables["Counts"]["independent_variables"]
    edges = m.true_binning.edges
    assert [true["values"][11]["low"], true["values"][11]["high"]] == list(edges[1:3])
    assert [reco["values"][11]["low"], reco["values"][11]["high"]] == list(edges[1:3])


def test_empty_bins_are_dashes_without_errors(tmp_path):
    table = toy_table(6, seed=1)
    m = accumulate(table, selected(table), table["weight"])
    folder = write_hepdata(m, tmp_path / "h")
    efficiency = json.loads((folder / "efficiency.yaml").read_text())
    check_table(efficiency)
    cells = efficiency["dependent_variables"][0]["values"]
    assert {"value": "-"} in cells


def test_an_existing_folder_is_refused(folder):
    with pytest.raises(StudyError, match="a new folder is required, but this exists"):
        write_hepdata(matrix(), folder)


def test_the_checks_reject_what_the_rules_forbid(folder):
    jsonschema = require("jsonschema")
    good = json.loads((folder / "generated.yaml").read_text())

    def broken(change):
        data = copy.deepcopy(good)
        change(data)
        return data

    def drop_high(d):
        del d["independent_variables"][0]["values"][0]["high"]

    def zero_error(d):
        d["dependent_variables"][0]["values"][0]["errors"] = [{"symerror": 0}]

    def two_kinds(d):
        d["dependent_variables"][0]["values"][0]["errors"] = [
            {"symerror": 1, "asymerror": {"plus": 1, "minus": -1}}
        ]

    def extra_key(d):
        d["comment"] = "x"

    for change in (drop_high, zero_error, two_kinds, extra_key):
        with pytest.raises((jsonschema.ValidationError, AssertionError)):
            check_table(broken(change))
    check_table(good)
