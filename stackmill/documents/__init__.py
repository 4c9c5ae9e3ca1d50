"""YAML text to checked, frozen records that remember their lines; no physics.

Each reader takes a path, a text or part of a file that has been read, and gives a Document; it raises
InputErrors with every complaint at once, and FileAccessError where a file cannot be read.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from stackmill.documents.job import JobFile
    from stackmill.documents.material import MaterialsFile
    from stackmill.documents.mill import Mill
    from stackmill.documents.reading import Document, Source
    from stackmill.documents.recipe import Recipe
    from stackmill.documents.stack import Stack


def read_stack(source: Source, *, file: str = "") -> Document[Stack]:
    """Read a stack file. Raises InputErrors, FileAccessError."""
    from stackmill.documents.reading import read_document
    from stackmill.documents.stack import Stack

    return read_document(Stack, source, file=file)


def read_mill(source: Source, *, file: str = "") -> Document[Mill]:
    """Read a mill file, and the beam map it may name, beside it. Raises InputErrors, FileAccessError."""
    from pathlib import Path

    from stackmill.documents.mill import Mill
    from stackmill.documents.profile import with_map
    from stackmill.documents.reading import read_document
    from stackmill.errors import InputErrors

    document = read_document(Mill, source, file=file)
    document, errors = with_map(document, source.parent if isinstance(source, Path) else Path())
    if errors:
        raise InputErrors(errors)
    return document


def read_recipe(source: Source, *, file: str = "") -> Document[Recipe]:
    """Read a recipe file. Raises InputErrors, FileAccessError."""
    from stackmill.documents.reading import read_document
    from stackmill.documents.recipe import Recipe

    return read_document(Recipe, source, file=file)


def read_job(source: Source, *, file: str = "") -> Document[JobFile]:
    """Read a job file; what it binds is not opened. Raises InputErrors, FileAccessError."""
    from stackmill.documents.job import JobFile
    from stackmill.documents.reading import read_document

    return read_document(JobFile, source, file=file)


def read_materials(source: Source, *, file: str = "") -> Document[MaterialsFile]:
    """Read a lab's materials file. Raises InputErrors, FileAccessError."""
    from stackmill.documents.material import MaterialsFile
    from stackmill.documents.reading import read_document

    return read_document(MaterialsFile, source, file=file)
