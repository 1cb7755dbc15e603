"""The JSON Schema of the case file, by which editors complete and check it."""

from __future__ import annotations

from typing import Any

from pydantic.json_schema import GenerateJsonSchema
from pydantic_core import core_schema

from coldseam.case.model import Case

DRAFT = "https://json-schema.org/draft/2020-12/schema"


class _FileSchema(GenerateJsonSchema):
    """pydantic's generator for a file format that has no null."""

    def nullable_schema(self, schema: core_schema.NullableSchema) -> dict[str, Any]:
        return self.generate_inner(schema["schema"])

    def default_schema(self, schema: core_schema.WithDefaultSchema) -> dict[str, Any]:
        return self.generate_inner(schema["schema"])

    def get_title_from_name(self, name: str) -> str:
        return name


def json_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of a case file, keys as in the file.

    It holds what can be said of single tables; references between tables, units in texts and
    numbers of dimensions are checked by :mod:`coldseam.case.read`.
    """
    schema = Case.model_json_schema(by_alias=True, schema_generator=_FileSchema, mode="validation")
    return {"$schema": DRAFT, **schema}
