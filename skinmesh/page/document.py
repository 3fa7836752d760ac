"""The page as one HTML text that asks for nothing from outside."""

from __future__ import annotations

import json
import re
from base64 import b64encode
from collections.abc import Mapping
from hashlib import sha256
from html import escape
from pathlib import Path
from typing import Any

from skinmesh.page.packing import Packed

_ASSETS = Path(__file__).parent / "assets"
LIBRARY = "three.bundle.min.js"
LICENCE = "three.LICENSE.txt"
SCRIPTS = tuple(
    f"{part}.js"
    for part in (
        *("data", "paint", "places", "arrows", "camera", "overlay", "viewer", "plain"),
        *("picked", "cut", "cutview", "charts", "tables", "main"),
    )
)
_PLACE = re.compile(r"\{\{(\w+)\}\}")


def page_html(words: Mapping[str, Any], packed: Packed) -> str:
    """Put words, mesh, library, style and script into the frame of the page.

    Names and titles travel as JSON in which nothing can end the element that holds it, and the script writes them as
    text. A content security policy lets the browser run nothing but the page's own two scripts, known by their
    SHA-256, and load nothing at all (W3C, Content Security Policy Level 3).

    Parameters
    ----------
    words : mapping
        For JSON: ``skinmesh.page.gather.gather_words``.
    packed : Packed
        The mesh.

    Returns
    -------
    str
    """
    library = f"/*\n{_asset(LICENCE)}*/\n{_asset(LIBRARY)}"
    script = "".join(['"use strict";\n(() => {\n', *map(_asset, SCRIPTS), "})();\n"])
    if any("</script" in text.lower() or "<!--" in text for text in (library, script)):
        raise ValueError("a script of the page would end its own element")
    policy = (
        f"default-src 'none'; script-src {_source(library)} {_source(script)}; style-src 'unsafe-inline'; "
        "img-src data: blob:; base-uri 'none'; form-action 'none'"
    )
    parts = {
        "TITLE": escape(str(words["title"])),
        "POLICY": escape(policy),
        "STYLE": _asset("page.css"),
        "LIBRARY": library,
        "WORDS": embedded_json({**words, "arrays": packed.contents}),
        "MESH": packed.text,
        "SCRIPT": script,
    }
    # One pass, so that a title which looks like a place is not filled in turn.
    return _PLACE.sub(lambda place: parts[place[1]], _asset("page.html"))


def embedded_json(value: Any) -> str:
    r"""JSON that can stand inside a script element whatever its strings hold.

    Examples
    --------
    >>> embedded_json({"title": "</script><!--"})
    '{"title": "\\u003c/script\\u003e\\u003c!--"}'
    """
    text = json.dumps(value, ensure_ascii=True, allow_nan=False)
    for letter in "<>&":
        text = text.replace(letter, f"\\u{ord(letter):04x}")
    return text


def _asset(name: str) -> str:
    return (_ASSETS / name).read_text(encoding="utf-8")


def _source(script: str) -> str:
    return f"'sha256-{b64encode(sha256(script.encode()).digest()).decode()}'"
