"""What the documents say is true."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

from gateway.hold import BEGIN_MARK, END_MARK, diagram_markdown

ROOT = Path(__file__).parent.parent


def test_the_readme_example_prints_what_the_readme_says() -> None:
    """The ten lines of library use run as they stand and print the line below them."""
    readme = (ROOT / "README.md").read_text()
    found = re.search(r"```python\n(.*?)```\n\n((?:    [^\n]*\n)+)", readme, re.S)
    assert found is not None
    code, printed = found.groups()
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code], capture_output=True, text=True, cwd=ROOT, check=False
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.strip() == printed.strip()


def test_the_hold_table_in_the_documents_is_the_one_in_the_code() -> None:
    """DEVELOPERS.md holds exactly what `gateway.hold` generates."""
    text = (ROOT / "DEVELOPERS.md").read_text()
    assert text[text.index(BEGIN_MARK) : text.index(END_MARK) + len(END_MARK)] == diagram_markdown()


def test_every_linked_file_exists() -> None:
    """Relative links in both documents lead somewhere."""
    for name in ("README.md", "DEVELOPERS.md"):
        for target in re.findall(r"\]\(([^)#:]+)\)", (ROOT / name).read_text()):
            assert (ROOT / target).exists(), f"{name} links to {target}"
