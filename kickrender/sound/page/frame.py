"""One-file pages: what belongs to a page is put inside it, so that it works from disk, with no server and no network.

A page is three files, NAME.html, NAME.css and NAME.js, in the folder `pages` of the package that writes it, set into
the frame and the look that all pages share. Its data stand in a script element of their own, as JSON.
"""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Sequence
from importlib import resources
from typing import Any

FRAME, LOOK = "frame.html", "look.css"


def page_bytes(package: str, name: str, data: object, media: Sequence[str] = (), **values: Any) -> bytes:
    """A whole HTML page, UTF-8.

    Parameters
    ----------
    package, name : str
        Where the page's own files are: `pages/NAME.html` and so on in that package.
    data : JSON value
        What the script works on.
    media : sequence of str
        Where the page's sounds may come from, in the words of Content Security Policy ("'self'", "file:").
    values
        What the template uses; every text is escaped.

    The page's own policy allows the style and the script that were put in, by their digests, and nothing else:
    whatever a name or a title holds can neither run nor send anything. Source: W3C, Content Security Policy Level 3.
    """
    import jinja2  # here, for the commands that write no page
    from markupsafe import Markup

    texts = _texts(package, name)
    environment = jinja2.Environment(
        loader=jinja2.DictLoader({FRAME: texts[FRAME], "page.html": texts[f"{name}.html"]}),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    style, script = texts[LOOK] + texts[f"{name}.css"], texts[f"{name}.js"]
    policy = {
        "default-src": ["'none'"],
        "style-src": [_digest(style)],
        "script-src": [_digest(script)],
        "img-src": ["data:"],
        "media-src": list(media) or ["'none'"],
        "base-uri": ["'none'"],
        "form-action": ["'none'"],
    }
    page = environment.get_template("page.html").render(
        policy="; ".join(" ".join([key, *allowed]) for key, allowed in policy.items()),
        style=Markup(style),
        script=Markup(script),
        data=Markup(script_json(data)),
        **values,
    )
    return page.encode()


def pages_digest(package: str, name: str) -> str:
    """SHA-256 over the files a page is made of: another digest, another page from the same data."""
    whole = hashlib.sha256()
    for text in _texts(package, name).values():
        whole.update(text.encode())
        whole.update(b"\0")
    return whole.hexdigest()


def script_json(data: object) -> str:
    """JSON that may stand inside a script element: no character in it can end the element or begin a comment."""
    text = json.dumps(data, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for character in "<>&\u2028\u2029":
        text = text.replace(character, f"\\u{ord(character):04x}")
    return text


def _texts(package: str, name: str) -> dict[str, str]:
    shared, own = resources.files(__package__), resources.files(package) / "pages"
    files = {FRAME: shared / FRAME, LOOK: shared / LOOK, **{f"{name}.{e}": own / f"{name}.{e}" for e in ENDINGS}}
    return {file: path.read_text("utf-8") for file, path in files.items()}


def _digest(text: str) -> str:
    return f"'sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()}'"


ENDINGS = ("html", "css", "js")
