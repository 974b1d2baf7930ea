"""Print one of the README's two set-up-and-go commands, so that CI runs what a reader runs."""

from __future__ import annotations

import re
import sys
from pathlib import Path

text = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")
commands = re.findall(r"```sh\n(.*?)```", text, flags=re.DOTALL)
if len(commands) != 2:
    sys.exit(f"README.md holds {len(commands)} sh blocks; it must hold the two commands and no other")
print(commands[int(sys.argv[1]) - 1].strip())
