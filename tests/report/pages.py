"""Reading a PDF back with two libraries that did not write it."""

from __future__ import annotations

import io
from collections.abc import Iterator
from typing import Any

import pikepdf
import pypdfium2


def page_texts(pdf: bytes) -> list[str]:
    """Text of each page, white space as single spaces (PDFium)."""
    document = pypdfium2.PdfDocument(pdf)
    try:
        texts = [document[i].get_textpage().get_text_range() for i in range(len(document))]
    finally:
        document.close()
    # U+FFFE stands where PDFium joins a line that was broken; U+200B is where lines may break.
    return [" ".join(text.replace("\ufffe", "").replace("\u200b", "").split()) for text in texts]


def tags(pdf: bytes) -> list[tuple[str, str]]:
    """Structure types in reading order, each with its alternative text (qpdf)."""
    with pikepdf.open(io.BytesIO(pdf)) as document:
        return list(_walk(document.Root.StructTreeRoot.K))


def _walk(node: Any) -> Iterator[tuple[str, str]]:
    if isinstance(node, pikepdf.Array):
        for kid in node:
            yield from _walk(kid)
    elif isinstance(node, pikepdf.Dictionary) and "/S" in node:
        yield str(node.S), str(node.get("/Alt", ""))
        if "/K" in node:
            yield from _walk(node.K)
