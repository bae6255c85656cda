"""The vocabulary as JSON Schema, and its docs."""

import json

from wellshed.scenarios.questions import options_of, question_names
from wellshed.scenarios.schema import scenario_model
from wellshed.scenarios.schema_check import json_schema


def test_kept_schema_is_the_generated_one(source_root):
    kept = (source_root / "scenarios" / "scenario.schema.json").read_text(encoding="utf-8")
    assert kept == json_schema(), "run: wellshed schema > scenarios/scenario.schema.json"


def nodes(node):
    yield node
    for child in node.values() if isinstance(node, dict) else node if isinstance(node, list) else ():
        yield from nodes(child)


def test_only_constructs_of_draft_7():
    schema = json.loads(json_schema())
    assert schema["$schema"].startswith("http://json-schema.org/draft-07")
    younger = {"$defs", "prefixItems", "unevaluatedProperties", "unevaluatedItems", "dependentRequired"}
    younger |= {"dependentSchemas", "$anchor", "$dynamicRef", "minContains", "maxContains"}
    for node in nodes(schema):
        if isinstance(node, dict):
            assert not younger & set(node)
            if "$ref" in node:
                assert set(node) == {"$ref"}
                assert node["$ref"].removeprefix("#/definitions/") in schema["definitions"]


def test_every_key_is_described():
    schema = json.loads(json_schema())
    for name, block in [("scenario", schema), *schema["definitions"].items()]:
        for key, field in block.get("properties", {}).items():
            ref = field.get("$ref") or field.get("allOf", [{}])[0].get("$ref", "")
            block_of = schema["definitions"].get(ref.removeprefix("#/definitions/"), {})
            assert field.get("description") or block_of.get("description"), f"{name}.{key}"


def test_questions_are_the_modules_of_their_package():
    assert question_names() == ("capture_zone", "water_table")
    question = scenario_model().model_json_schema(by_alias=True)["$defs"]["QuestionBlock"]
    assert set(question["properties"]) == set(question_names())
    for name in question_names():
        assert options_of(name).model_config["extra"] == "forbid"
        assert options_of(name).model_config["frozen"]
