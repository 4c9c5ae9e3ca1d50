"""Write docs/glossary.md from stackmill.glossary: python tests/write_glossary.py"""

from __future__ import annotations

from pathlib import Path

from stackmill.glossary import GLOSSARY

PAGE = Path(__file__).parents[1] / "docs" / "glossary.md"


def page() -> str:
    """The page as Markdown."""
    rows = [f"| {word.name} | {word.meaning} | {word.unit} |" for word in GLOSSARY]
    head = [
        "# Glossary",
        "",
        "Written from stackmill/glossary.py.",
        "",
        "| word | meaning | inside unit |",
        "|---|---|---|",
    ]
    return "\n".join([*head, *rows]) + "\n"


if __name__ == "__main__":
    PAGE.write_text(page(), encoding="utf-8")
