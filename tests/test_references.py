"""Every source named in code and tests stands in references.md."""

from __future__ import annotations

import ast
import io
import re
import tokenize
from functools import cache
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
FILES = sorted([*(ROOT / "flatplan").rglob("*.py"), *(ROOT / "tests").rglob("*.py")])
KEY = re.compile(r"\[([A-Za-z]{3,}(?:\d{4}[a-z]?|SP\d{3}))\]")
HEADING = re.compile(r"^## \[([^\]]+)\]$", re.MULTILINE)


@cache
def entries() -> list[tuple[str, str]]:
    """(key, text) of each source in references.md."""
    parts = HEADING.split((ROOT / "references.md").read_text(encoding="utf-8"))
    return list(zip(parts[1::2], parts[2::2], strict=True))


def keys_in(path: Path) -> set[str]:
    """Keys in the comments and texts of a file."""
    source = path.read_text(encoding="utf-8")
    texts = [node.value for node in ast.walk(ast.parse(source)) if isinstance(node, ast.Constant) and isinstance(node.value, str)]
    texts += [t.string for t in tokenize.generate_tokens(io.StringIO(source).readline) if t.type == tokenize.COMMENT]
    return {key for text in texts for key in KEY.findall(text)}


def test_a_key_is_recognised_in_every_form():
    assert KEY.findall("[NISTSP811] [Gevrey1918]_ [" + "Dake1978b], [1] [a1] [array] [x2000]") == ["NISTSP811", "Gevrey1918", "Dake1978b"]


@pytest.mark.parametrize("path", FILES, ids=[str(path.relative_to(ROOT)) for path in FILES])
def test_every_key_resolves(path):
    unknown = keys_in(path) - {key for key, _ in entries()}
    assert not unknown, f"not in references.md: {sorted(unknown)}"


def test_entries_are_sorted_single_and_well_formed():
    keys = [key for key, _ in entries()]
    assert keys == sorted(set(keys), key=str.lower)
    for key, text in entries():
        assert KEY.fullmatch(f"[{key}]"), key
        assert "Consulted:" in text, f"{key} does not say how far the source was consulted"
        assert "For:" in text, f"{key} does not say what it is used for"
