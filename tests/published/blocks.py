"""Replaces one top-level block of a library entry's YAML text, leaving all else as it stands."""

from __future__ import annotations

import re
from pathlib import Path

from stackmill.materials import library

DATA = Path(library.__file__).parent / "data"


def entry_path(name: str) -> Path:
    """The file of the library entry called `name`."""
    for path in sorted(DATA.glob("*.yaml")):
        if path.read_text(encoding="utf-8").split("\n", 1)[0] == f"name: {name}":
            return path
    raise FileNotFoundError(f"no library entry is called {name}")


def replaced(text: str, key: str, block: str) -> str:
    """`text` with its top-level `key:` block replaced by `block` (which holds the key), or added last."""
    pattern = re.compile(rf"^{key}:.*\n(?:[ \t].*\n)*", re.MULTILINE)
    block = block.rstrip("\n") + "\n"
    if pattern.search(text):
        return pattern.sub(lambda _: block, text, count=1)
    return text.rstrip("\n") + "\n" + block
