"""Write the output that README.md shows from real runs; a test fails where the two differ."""

from __future__ import annotations

import contextlib
import io
import re
import sys
from pathlib import Path

ROOT = Path(__file__).parents[1]
BLOCK = re.compile(r"<!-- output: (.*?)( \| .*?)? -->\n```text\n(.*?)```", re.DOTALL)


def output(command: str, part: str) -> str:
    """Run one command line of the package and keep the part the README shows."""
    from gasphys.__main__ import main

    text = io.StringIO()
    with contextlib.redirect_stdout(text):
        main([str(ROOT / word) if word.startswith("notebooks/") else word for word in command.split()])
    lines = text.getvalue().splitlines()
    match = re.fullmatch(r" \| lines (\d+)-(\d+)", part or "")
    if match:
        lines = lines[int(match[1]) - 1 : int(match[2])]
    return "\n".join(line.rstrip() for line in lines) + "\n"


def renewed(text: str) -> str:
    """Return the README with every output block run again."""
    return BLOCK.sub(
        lambda m: f"<!-- output: {m[1]}{m[2] or ''} -->\n```text\n{output(m[1], m[2] or '')}```", text
    )


def figure(path: Path) -> None:
    """Draw the README's figure."""
    from gasphys.__main__ import main

    with contextlib.redirect_stdout(io.StringIO()):
        main(["review", str(ROOT / "notebooks/data/dive_in_the_sound.csv"), "--figure", str(path)])


if __name__ == "__main__":
    sys.path.insert(0, str(ROOT))
    readme = ROOT / "README.md"
    readme.write_text(renewed(readme.read_text(encoding="utf-8")), encoding="utf-8")
    (ROOT / "docs" / "figures").mkdir(exist_ok=True)
    figure(ROOT / "docs" / "figures" / "dive_in_the_sound.png")
