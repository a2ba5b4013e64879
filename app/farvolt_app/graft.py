"""Pictures that are PDFs of their own, drawn on the pages of another PDF: as lines and text, at any scale."""

import io
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, cast

if TYPE_CHECKING:
    from pypdf import PdfWriter

MM_POINTS = 72 / 25.4


@dataclass(frozen=True, slots=True)
class Graft:
    """Where a picture goes: a page (from 0), a box on it in mm from its top left corner, and which part is shown.

    `part` is the left, top, width and height of what is shown, in the picture's own units from its top left corner;
    it fills the box, so both must have one shape. None: all of it.
    """

    page: int
    picture: bytes
    x_mm: float
    y_mm: float
    width_mm: float
    height_mm: float
    part: tuple[float, float, float, float] | None = None


def graft(document: bytes, grafts: Sequence[Graft]) -> bytes:
    """The document with each picture in its place. A picture used many times is stored once."""
    if not grafts:
        return document
    from pypdf import PdfWriter

    writer = PdfWriter(clone_from=io.BytesIO(document))
    forms: dict[int, _Form] = {}
    for number, one in enumerate(grafts):
        form = forms.get(id(one.picture))
        if form is None:
            form = forms[id(one.picture)] = _Form(writer, one.picture)
        _draw(writer, one, form, f"/Picture{number}")
    out = io.BytesIO()
    writer.write(out)
    return out.getvalue()


class _Form:
    """A picture's only page as an object that pages can draw."""

    def __init__(self, writer: "PdfWriter", picture: bytes) -> None:
        from pypdf import PdfReader
        from pypdf.generic import ArrayObject, DecodedStreamObject, DictionaryObject, FloatObject, NameObject

        page = PdfReader(io.BytesIO(picture)).pages[0]
        self.width, self.height = float(page.mediabox.width), float(page.mediabox.height)
        form = DecodedStreamObject()
        contents = page.get_contents()
        form.set_data(contents.get_data() if contents is not None else b"")
        form[NameObject("/Type")] = NameObject("/XObject")
        form[NameObject("/Subtype")] = NameObject("/Form")
        form[NameObject("/BBox")] = ArrayObject(map(FloatObject, (0, 0, self.width, self.height)))
        form[NameObject("/Resources")] = cast(DictionaryObject, page["/Resources"].get_object()).clone(writer)
        self.reference = writer._add_object(form.flate_encode())


def _draw(writer: "PdfWriter", one: Graft, form: _Form, name: str) -> None:
    """Put the form among the page's resources, and what draws it below all that the page holds."""
    from pypdf.generic import ArrayObject, DecodedStreamObject, DictionaryObject, NameObject

    page = writer.pages[one.page]
    left, top, width, height = one.part or (0.0, 0.0, form.width, form.height)
    x, y = one.x_mm * MM_POINTS, float(page.mediabox.height) - (one.y_mm + one.height_mm) * MM_POINTS
    wide, tall = one.width_mm * MM_POINTS, one.height_mm * MM_POINTS
    across, up = wide / width, tall / height
    bottom = form.height - top - height
    content = DecodedStreamObject()
    content.set_data(
        f"q {x:.3f} {y:.3f} {wide:.3f} {tall:.3f} re W n {across:.6f} 0 0 {up:.6f} "
        f"{x - left * across:.3f} {y - bottom * up:.3f} cm {name} Do Q".encode()
    )
    # The document's pages share one set of resources; this page gets its own copy, with the picture in it.
    resources = DictionaryObject(cast(DictionaryObject, page["/Resources"].get_object()))
    known = cast(DictionaryObject, resources.get("/XObject", DictionaryObject()).get_object())
    resources[NameObject("/XObject")] = DictionaryObject({**known, NameObject(name): form.reference})
    page[NameObject("/Resources")] = resources
    before = page["/Contents"].get_object()
    kept = list(before) if isinstance(before, ArrayObject) else [page.raw_get("/Contents")]
    page[NameObject("/Contents")] = ArrayObject([writer._add_object(content), *kept])
