"""The JSON Schema of the campaign file, for editors that complete and check while one types."""

from __future__ import annotations

from typing import Any

from tapband.files.model_plan import CampaignPart


def schema() -> dict[str, Any]:
    """The JSON Schema (draft 2020-12) of the campaign file.

    A file that an editor accepts can still be refused: units, tables and rules between keys are read later.
    """
    body = CampaignPart.model_json_schema(by_alias=True)
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **body, "title": "tapband campaign"}
