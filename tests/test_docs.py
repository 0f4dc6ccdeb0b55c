"""The documentation agrees with the code and with itself."""

import re
from pathlib import Path

import pytest

from hologyre import tables
from hologyre.edits import NAME
from hologyre.results.folder import FILES, FOUND

ROOT = Path(__file__).parents[1]
PAGES = sorted([ROOT / "README.md", ROOT / "DEVELOPERS.md", *(ROOT / "docs").rglob("*.md")])


@pytest.mark.parametrize(
    ("name", "columns"),
    [
        ("trajectories.csv", tables.TRAJECTORIES),
        ("singularities.csv", tables.SINGULARITIES),
        ("events.csv", tables.EVENTS),
        ("frames.csv", tables.FRAMES),
    ],
)
def test_every_column_is_described_as_the_code_describes_it(name, columns):
    page = (ROOT / "docs" / "files.md").read_text(encoding="utf-8")
    section = page.split(f"### {name}\n")[1].split("\n#")[0]
    rows = re.findall(r"^\| `(\w+)` \| (.+) \|$", section, re.MULTILINE)
    assert rows == [(column.name, column.meaning) for column in columns]


def test_every_file_of_a_result_folder_is_described():
    page = (ROOT / "docs" / "files.md").read_text(encoding="utf-8")
    section = page.split("## The result folder\n")[1].split("\n#")[0]
    rows = re.findall(r"^\| `([\w./]+)` \|", section, re.MULTILINE)
    assert sorted(rows) == sorted([*FILES, NAME, f"{FOUND}/"])


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_links_to_files_lead_somewhere(page):
    text = page.read_text(encoding="utf-8")
    links = [link for link in re.findall(r"\]\(([^)#]+)", text) if "://" not in link]
    missing = [link for link in links if not (page.parent / link).exists()]
    assert missing == []


def test_readme_commands_are_two():
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    setup = readme.split("## Set up")[1].split("\n## ")[0]
    commands = re.findall(r"```sh\n(.+?)```", setup, re.DOTALL)
    assert [command.count("\n") for command in commands] == [1, 1]
