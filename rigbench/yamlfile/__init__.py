"""YAML files that know their lines, and their validation into faults with an address.

:func:`load` reads YAML with the 1.2 core scalars (1e-5 is a number, ``on`` is text, 010 is 10, a
date is text) and keeps the line of every key and list item. :func:`validate` checks what was read
against a pydantic model derived from :class:`Declared` and turns whatever is wrong into
:class:`~rigbench.errors.Fault` values, all at once; :func:`partial` also returns what is right.
"""

from rigbench.yamlfile.document import Document, KeyPath, key_text, read_text
from rigbench.yamlfile.reading import load
from rigbench.yamlfile.validating import Declared, partial, validate
from rigbench.yamlfile.wording import branches

__all__ = [
    "Declared",
    "Document",
    "KeyPath",
    "branches",
    "key_text",
    "load",
    "partial",
    "read_text",
    "validate",
]
