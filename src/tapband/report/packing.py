"""Arrays and text as the page takes them: base64 of little-endian numbers, and JSON safe inside a script."""

from __future__ import annotations

import json
from base64 import b64encode
from collections.abc import Iterable, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from tapband.files.write_json import plain


def packed(values: object, kind: str = "<f8") -> dict[str, str]:
    """An array as the page unpacks it: its type and its bytes."""
    array = np.ascontiguousarray(values, dtype=np.dtype(kind))
    return {"t": kind[1:], "b": b64encode(array.tobytes()).decode("ascii")}


def embedded(data: Mapping[str, object]) -> str:
    """The object as JSON that is safe inside a script element: no character there can end it."""
    text = json.dumps(plain(data), ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


def codes(values: Iterable[object], known: Sequence[str]) -> NDArray[np.int64]:
    """Index of each value in ``known``."""
    place: dict[object, int] = {name: i for i, name in enumerate(known)}
    return np.fromiter((place[value] for value in values), dtype=np.int64)
