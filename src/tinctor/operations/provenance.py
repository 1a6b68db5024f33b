"""What a result rests on: versions, digests, and every setting after defaults were filled in."""

from __future__ import annotations

import hashlib
import json
import sys
from typing import Any

import numpy as np
from pydantic import Field

from tinctor.operations.shared import RecordUsed, RequestModel, ResponseModel
from tinctor.version import __version__

__all__ = ["Provenance", "canonical_json", "provenance", "request_sha256"]


class Provenance(ResponseModel):
    """Enough to compute a result again from the record alone, together with the request."""

    software: str = "tinctor"
    version: str
    python: str
    numpy: str
    scipy: str | None = Field(default=None, description="null where it was not used")
    request_sha256: str = Field(description="of the request in canonical form: keys sorted, no blanks, defaults filled in")
    records: list[RecordUsed] = Field(default=[])
    settings: dict[str, Any] = Field(default={})


def canonical_json(document: Any) -> str:
    """Return a document with sorted keys and no blanks; numbers as the shortest text that reads back the same.

    Examples
    --------
    >>> canonical_json({"b": 1.0, "a": [True, None]})
    '{"a":[true,null],"b":1.0}'
    """
    return json.dumps(document, sort_keys=True, separators=(",", ":"), allow_nan=False, ensure_ascii=False)


def request_sha256(request: RequestModel) -> str:
    """Return the SHA-256 of a request in canonical form."""
    return hashlib.sha256(canonical_json(request.model_dump(by_alias=True)).encode()).hexdigest()


def provenance(
    request: RequestModel, records: list[RecordUsed], settings: dict[str, Any], *, with_scipy: bool = False
) -> Provenance:
    """Return the provenance of a response; `with_scipy` when the operation uses it, whatever else this process has loaded."""
    return Provenance(
        version=__version__,
        python=sys.version.split()[0],
        numpy=np.__version__,
        scipy=_scipy_version() if with_scipy else None,
        request_sha256=request_sha256(request),
        records=records,
        settings=settings,
    )


def _scipy_version() -> str:
    """Version of scipy, imported here alone: importing it for every operation would cost a cold start."""
    import scipy

    return str(scipy.__version__)
