"""Print the README's two set-up commands, as a shell script for CI: the first two lines of code in it."""

from __future__ import annotations

import re
import sys
from pathlib import Path


def commands(readme: str) -> list[str]:
    """The one-line code blocks of a README, in order."""
    blocks = re.findall(r"```(?:sh|bash|console)\n(.*?)\n```", readme, flags=re.DOTALL)
    return [block for block in blocks if "\n" not in block]


if __name__ == "__main__":
    print("\n".join(commands(Path(sys.argv[1]).read_text(encoding="utf-8"))[:2]))
