"""PDF files written byte by byte, for what no drawing library would write."""

from __future__ import annotations

__all__ = ["document", "page", "stream"]


def stream(content: bytes, entries: str = "") -> bytes:
    """A stream object with entries of its own."""
    head = f"<<{entries}/Length {len(content)}>>stream\n".encode()
    return head + content + b"\nendstream"


def document(*objects: bytes | str) -> bytes:
    """A file whose first object is the catalogue."""
    out = b"%PDF-1.5\n"
    places = []
    for number, item in enumerate(objects, 1):
        places.append(len(out))
        body = item if isinstance(item, bytes) else item.encode()
        out += b"%d 0 obj\n" % number + body + b"\nendobj\n"
    table = b"".join(b"%010d 00000 n \n" % place for place in places)
    size = len(objects) + 1
    end = b"xref\n0 %d\n0000000000 65535 f \n" % size + table
    return out + end + b"trailer<</Size %d/Root 1 0 R>>\nstartxref\n%d\n%%%%EOF" % (size, len(out))


def page(
    content: bytes | str,
    size: tuple[float, float] = (300, 200),
    entries: str = "",
    resources: str = "",
    extra: tuple[bytes, ...] = (),
) -> bytes:
    """A file of one page; `extra` objects are numbered from 6, font F1 is object 5."""
    body = content if isinstance(content, bytes) else content.encode()
    return document(
        "<</Type/Catalog/Pages 2 0 R>>",
        "<</Type/Pages/Kids[3 0 R]/Count 1>>",
        f"<</Type/Page/Parent 2 0 R/MediaBox[0 0 {size[0]} {size[1]}]{entries}/Contents 4 0 R"
        f"/Resources<</Font<</F1 5 0 R>>{resources}>>>>",
        stream(body),
        "<</Type/Font/Subtype/Type1/BaseFont/Helvetica/Encoding/WinAnsiEncoding>>",
        *extra,
    )
