"""Rounded values as exact decimals, for tables."""

from typing import Any

import numpy as np

from dec.arrays import AnyArray, ObjectArray
from dec.audit.digits.rounding import Rounded
from dec.audit.names import vertex_names

__all__ = ["rounded_columns", "rounded_dict", "rounded_vertex_columns"]


def rounded_columns(found: Rounded) -> dict[str, AnyArray]:
    """The columns that rounding adds to the table of edges: exact decimals as text, empty where nothing follows.

    Returns
    -------
    dict of heading to object array of str, shape (n1,)
        "rounded", and "rounded_to", which its values are whole multiples of.

    Examples
    --------
    >>> import pandas as pd
    >>> from dec.audit.digits.rounding import rounded
    >>> from dec.audit.questions import loops
    >>> from dec.calculus.dataset import Dataset
    >>> rows = pd.DataFrame({"from": ["A", "B", "C"], "to": ["B", "C", "A"], "dh": ["1.14", "2.24", "-3.38"]})
    >>> rounded_columns(rounded(loops(Dataset.from_frames(rows), value="dh"), 0.1))["rounded"].tolist()
    ['1.1', '2.3', '-3.4']
    """
    tail = found.audit.data.complex.tail
    return {
        "rounded": _texts(found, found.edges, tail, found.follows),
        "rounded_to": np.array(found.units.texts(np.ones(len(tail), np.int64), tail), dtype=object),
    }


def rounded_vertex_columns(found: Rounded) -> dict[str, AnyArray]:
    """Ids of the vertices, and their rounded supplies or potentials as exact decimals, empty where there is none."""
    n = found.audit.data.complex.counts[0]
    name = "rounded_potential" if found.audit.law == "loop" else "rounded_supply"
    values = _texts(found, found.vertices, np.arange(n), found.stated)
    return {"id": vertex_names(found.audit.data.complex), name: values}


def rounded_dict(found: Rounded) -> dict[str, Any]:
    """The rounded values as plain Python objects, for JSON: what they are multiples of, decimals as text, notes."""
    edges, vertices = rounded_columns(found), rounded_vertex_columns(found)
    kept = found.stated.tolist()
    name = "rounded_potential" if found.audit.law == "loop" else "rounded_supply"
    pairs = zip(vertices["id"].tolist(), vertices[name].tolist(), kept, strict=True)
    return {
        "units": sorted(set(edges["rounded_to"].tolist())),
        "edges": [text or None for text in edges["rounded"].tolist()],
        "vertices": {str(key): text for key, text, is_kept in pairs if is_kept},
        "notes": list(found.notes),
    }


def _texts(found: Rounded, whole: AnyArray, at: AnyArray, kept: AnyArray) -> ObjectArray:
    texts = np.array(found.units.texts(whole, at), dtype=object)
    texts[~kept] = ""
    return texts
