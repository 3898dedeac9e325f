"""A folder with two small circuits in it; a made-up pack with its listening sheet, open in a browser."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.run import render_plan
from kickrender.pack.sheet import sheet_bytes
from kickrender.pack.thumbnails import scale_of, thumbnails_of
from tests.browser import browser, complaints, requests
from tests.pack.folders import contents
from tests.pack.made_up import make_pack
from tests.pack.sheet_page import TITLE
from tests.pack.texts import MANY, VOICE
from tests.page_checks import resize

if TYPE_CHECKING:
    from selenium.webdriver import Chrome


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "voice.toml").write_text(VOICE)
    (tmp_path / "other.toml").write_text(VOICE.replace('"18n"', '"22n"'))
    return tmp_path


@pytest.fixture
def many(folder: Path) -> Path:
    """The file of a pack of 300 hits."""
    (folder / "many.toml").write_text(MANY)
    return folder / "many.toml"


@pytest.fixture(scope="session")
def many_rendered(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    """What lies in that pack's folder when nothing went wrong: path -> contents."""
    folder = tmp_path_factory.mktemp("many")
    (folder / "voice.toml").write_text(VOICE)
    render_plan(plan_pack(read_pack_text(MANY, "many.toml", folder)), folder / "out")
    return contents(folder / "out")


@pytest.fixture(scope="module")
def pack(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict[str, Any]]:
    folder = tmp_path_factory.mktemp("pack")
    manifest = make_pack(folder, TITLE, failed=[{"name": "gone", "reason": "no <i>solution</i>"}])
    scale = scale_of(manifest["hits"])
    thumbnails = thumbnails_of(folder, manifest["hits"], scale)
    (folder / "index.html").write_bytes(sheet_bytes(manifest, thumbnails, scale, {"decay": "s"}))
    return folder, manifest


@pytest.fixture(scope="module")
def window(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Chrome]:
    with browser(tmp_path_factory.mktemp("browser")) as chrome:
        yield chrome


@pytest.fixture
def sheet(window: Chrome, pack: tuple[Path, dict[str, Any]]) -> Iterator[Chrome]:
    """The sheet as a first visitor finds it; nothing may have been complained of by the end."""
    folder, _ = pack
    resize(window)
    window.get((folder / "index.html").as_uri())
    window.execute_script("localStorage.clear()")
    window.refresh()
    requests(window)
    complaints(window)
    yield window
    assert complaints(window) == []
