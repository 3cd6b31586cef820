"""Links lead somewhere, paths that pages name are there, and the map of the modules is complete."""

from __future__ import annotations

import re

import pytest
from pages import PACKAGES, PAGES, ROOT, anchors, blocks, inline_code, links, text

LINKS = [(page, link) for page in PAGES for link in links(page) if not re.match(r"[a-z]+:", link)]
_PATH = re.compile(rf"(?:{'|'.join(PACKAGES)}|tests|\.ci)/[\w./*-]+")


@pytest.mark.parametrize(("page", "link"), LINKS, ids=lambda value: value)
def test_relative_links_lead_somewhere(page: str, link: str) -> None:
    target, _, anchor = link.partition("#")
    assert (ROOT / (target or page)).exists()
    if anchor:
        assert anchor in anchors(target or page)


@pytest.mark.parametrize("page", PAGES)
def test_paths_named_are_there(page: str) -> None:
    paths = [path for code in inline_code(page) for path in _PATH.findall(code)]
    missing = [path for path in paths if not list(ROOT.glob(path))]
    assert not missing


def test_the_map_holds_every_module_once() -> None:
    the_map = text("DEVELOPERS.md").split("\n## The map\n")[1].split("\n## ")[0]
    cells = [row.split("|")[1] for row in the_map.splitlines() if row.startswith("|")]
    named = [name for cell in cells for name in re.findall(r"`(\w+/\w+\.py)`", cell)]
    modules = [
        path.relative_to(ROOT).as_posix()
        for package in PACKAGES
        for path in (ROOT / package).glob("*.py")
        if path.name != "__init__.py"
    ]
    assert sorted(named) == sorted(modules), "DEVELOPERS.md, The map"


def test_modules_named_to_be_run_are_there() -> None:
    run = re.compile(r"-m ((?:tests|reports)\.[\w.]+)")
    named = {name for code in inline_code("DEVELOPERS.md") for name in run.findall(code)}
    assert "reports.reference" in named
    assert all((ROOT / f"{name.replace('.', '/')}.py").is_file() for name in named)


def test_names_that_stay_are_there() -> None:
    from projection import loops

    said = re.search(r"\*Names that stay\.\*(.*?) keep", text("DEVELOPERS.md"), re.S)
    assert said is not None
    for name in re.findall(r"`(\w+)`", said[1]):
        assert getattr(loops, name).__module__ == "projection.loops"
        assert getattr(loops, name).__name__ == name


def test_fenced_blocks_say_their_language() -> None:
    assert all(one.language for page in PAGES for one in blocks(page))


def test_the_licence_is_named_alike_everywhere() -> None:
    licence = text("LICENSE")
    assert "Apache License" in licence
    assert "Version 2.0, January 2004" in licence
    assert "Copyright 2026 the duecourse developers" in licence
    assert 'license = "Apache-2.0"' in text("pyproject.toml")


def test_the_changelog_says_which_numbers_move() -> None:
    versions = re.split(r"^## ", text("CHANGELOG.md"), flags=re.M)[1:]
    version = re.search(r'^version = "([^"]+)"$', text("pyproject.toml"), re.M)
    assert version is not None
    assert versions[0].startswith(f"{version[1]} ")
    assert all("**Numbers that move" in one for one in versions)
