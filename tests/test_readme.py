"""What the README says is true: its listings run, its tables name what there is."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pytest

from ribbon.study import read_study

README = (Path(__file__).resolve().parents[1] / "README.md").read_text(encoding="utf-8")


def blocks(language: str) -> list[str]:
    """Fenced listings of a language."""
    return re.findall(rf"^```{language}\n(.*?)^```", README, re.M | re.S)


def test_the_first_runnable_line_comes_early() -> None:
    """A reader meets the first command within fifteen lines."""
    lines = README.splitlines()
    assert lines.index("```sh") < 15


def test_python_listing_prints_what_the_text_says(capsys: pytest.CaptureFixture[str]) -> None:
    """The listing is run and its output compared with the sentence below it."""
    listing, more = blocks("python")
    names: dict[str, Any] = {}
    exec(compile(listing, "README", "exec"), names)  # our own README, not text from outside
    printed = capsys.readouterr().out.splitlines()
    assert printed == ["s 0.392", "pz 0.0", "1 edge"]
    exec(compile(more, "README", "exec"), names)
    *_, below = capsys.readouterr().out.splitlines()
    assert float(below) == pytest.approx(80)
    assert f"# {float(below):.0f} sites" in more
    for line in printed:
        assert f"`{line}`" in README


def test_ribbon_file_listing_is_valid_and_shows_every_key(tmp_path: Path) -> None:
    """The listing reads back, and every key of the model stands in it."""
    (listing,) = blocks("toml")
    path = tmp_path / "listing.toml"
    path.write_text(listing, encoding="utf-8")
    file = read_study(path)
    for table in type(file).model_fields:
        value = getattr(file, table)
        for key in getattr(type(value), "model_fields", {}):
            assert re.search(rf"\b{key.rstrip('_')}\b", listing), f"{table}.{key}"


def test_linked_files_exist() -> None:
    """No link or picture of the README points nowhere."""
    root = Path(__file__).resolve().parents[1]
    for target in re.findall(r"\]\(([^)#]+)\)", README):
        if not target.startswith("http"):
            assert (root / target).exists(), target
