"""The JSON Schemas of site and balance files, for editors."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

from recon.declare.balance_shape import BalanceShape
from recon.declare.site_shape import file_shape

if TYPE_CHECKING:
    from pydantic import BaseModel


def schemas() -> dict[str, str]:
    """
    Give each schema's text by its file name in ``config``.

    A schema knows shapes alone; names that must exist and units that must fit are checked by
    ``recon.declare.site_file`` and ``recon.declare.balance_file``.
    """
    return {
        "site.schema.json": _text(file_shape(), "Site file of recon"),
        "balance.schema.json": _text(BalanceShape, "Balance file of recon"),
    }


def _text(shape: type[BaseModel], title: str) -> str:
    schema = shape.model_json_schema(by_alias=True)
    schema = {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        **schema,
        "title": title,
    }
    return json.dumps(schema, indent=1, ensure_ascii=False, sort_keys=True) + "\n"
