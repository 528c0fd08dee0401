"""The JSON Schema says of every key what it means, with an example, and knows all keys that reading knows."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Iterator
from typing import Any

from bad_input_corpus import GOOD
from tapband.files.acts import ACTS
from tapband.files.schema import schema


def _tables() -> Iterator[tuple[str, dict[str, Any]]]:
    """Every table of the schema: its name and its properties."""
    body = schema()
    yield "campaign", body["properties"]
    for name, table in body["$defs"].items():
        yield name, table["properties"]


def test_schema_is_json_of_the_stated_draft() -> None:
    body = json.loads(json.dumps(schema()))
    assert body["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    assert body["properties"]["format"]["const"] == 1


def test_every_key_has_a_description_and_an_example() -> None:
    tables = schema()["$defs"]
    for table, keys in _tables():
        for name, key in keys.items():
            described = key.get("description") or tables[key["$ref"].split("/")[-1]]["description"]
            assert described, f"{table}.{name}"
            assert key.get("examples"), f"{table}.{name}"


def test_no_table_but_a_channel_takes_unknown_keys() -> None:
    body = schema()
    for name, table in body["$defs"].items():
        assert table["additionalProperties"] == (name == "ChannelPart")
    assert body["additionalProperties"] is False


def test_schema_knows_every_key_of_the_good_campaign() -> None:
    document = tomllib.loads((GOOD / "campaign.toml").read_text())
    tables = dict(_tables())
    assert set(document) <= set(tables["campaign"])
    parts = {"section": "SectionPart", "taps": "TapsPart", "stream": "StreamPart", "forecast": "ForecastPart"}
    for key, table in parts.items():
        assert set(document[key]) <= set(tables[table])
    for source in document["source"]:
        assert set(source) <= set(tables["SourcePart"])


def test_editor_offers_every_quantity_to_act_on() -> None:
    offered = dict(_tables())["SourcePart"]["acts_on"]["anyOf"]
    assert offered[0]["enum"] == list(ACTS)
    assert offered[1]["items"]["enum"] == list(ACTS)
