"""Holds PDFs against clauses of ISO 19005-3:2012 (PDF/A-3, level A) and ISO 14289-1:2014 (PDF/UA-1).

    python tests/pdf/clauses.py FILE.pdf...        each file, each clause; ends with 1 where one is not met
    python tests/pdf/clauses.py --broken FILE.pdf  breaks copies of a sound file; each must be found out

Reads the file with pikepdf and takes nothing from the program that wrote it. A clause named here is checked as far
as the line beside it says and no further: this is no certificate. Not looked at: the glyphs' widths against the
font programs (6.2.11.5), the profile's own tables (6.2.3), and what only a reader can judge, such as whether an
alternative text says what the figure shows. Clauses of ISO 19005-3 that repeat those of ISO 19005-2 keep their numbers.
"""

import io
import re
import struct
import sys
from collections import Counter
from pathlib import Path

import pikepdf
from lxml import etree
from pikepdf import Array, Dictionary, Name, Stream, String

A = "ISO 19005-3"
UA = "ISO 14289-1"
CHECKS = []

NAMESPACES = {
    "rdf": "http://www.w3.org/1999/02/22-rdf-syntax-ns#",
    "dc": "http://purl.org/dc/elements/1.1/",
    "xmp": "http://ns.adobe.com/xap/1.0/",
    "pdf": "http://ns.adobe.com/pdf/1.3/",
    "pdfaid": "http://www.aiim.org/pdfa/ns/id/",
    "pdfuaid": "http://www.aiim.org/pdfua/ns/id/",
    "ext": "http://www.aiim.org/pdfa/ns/extension/",
    "schema": "http://www.aiim.org/pdfa/ns/schema#",
    "property": "http://www.aiim.org/pdfa/ns/property#",
}
# XMP Specification, September 2005, and ISO 19005-2, 6.6.2.3: what needs no description of its own.
PREDEFINED = {
    NAMESPACES["dc"]: {"title", "creator", "language", "format", "description", "subject", "date", "identifier", "rights"},
    NAMESPACES["xmp"]: {"CreatorTool", "ModifyDate", "CreateDate", "MetadataDate", "Identifier"},
    NAMESPACES["pdf"]: {"Keywords", "PDFVersion", "Producer"},
    NAMESPACES["pdfaid"]: {"part", "conformance", "amd"},
    NAMESPACES["ext"]: {"schemas"},
    "http://ns.adobe.com/xap/1.0/mm/": {"DocumentID", "History", "RenditionClass", "VersionID", "DerivedFrom"},
    "http://ns.adobe.com/xap/1.0/t/pg/": {"NPages", "MaxPageSize", "Fonts", "Colorants", "PlateNames"},
}
# ISO 32000-1, 14.8.4
STANDARD_TYPES = set(
    "Document Part Art Sect Div BlockQuote Caption TOC TOCI Index NonStruct Private P H H1 H2 H3 H4 H5 H6 L LI Lbl LBody "
    "Table TR TH TD THead TBody TFoot Span Quote Note Reference BibEntry Code Link Annot Ruby RB RT RP Warichu WT WP "
    "Figure Formula Form".split()
)


def clause(standard, number, says):
    """Puts a check into the list. It yields a sentence for each thing that is not as it has to be."""

    def keep(check):
        CHECKS.append((standard, number, says, check))
        return check

    return keep


class File:
    """A PDF with what most checks need of it, gathered once."""

    def __init__(self, data):
        self.data = data
        self.pdf = pikepdf.open(io.BytesIO(data))
        self.root = self.pdf.Root
        self.objects = [o for o in self.pdf.objects if isinstance(o, (Dictionary, Stream, Array))]
        self.dictionaries = [o for o in self.objects if isinstance(o, (Dictionary, Stream))]
        self.elements = list(self._elements())
        self.contents = [(f"page {n + 1}", page, pikepdf.parse_content_stream(page)) for n, page in enumerate(self.pdf.pages)]
        self.forms = [o for o in self.dictionaries if isinstance(o, Stream) and o.get("/Subtype") == "/Form"]
        self.contents += [("a form XObject", form, pikepdf.parse_content_stream(form)) for form in self.forms]

    def metadata(self):
        stream = self.root.get("/Metadata")
        return etree.fromstring(stream.read_bytes()) if isinstance(stream, Stream) else None

    def _elements(self):
        """Structure elements in reading order: element, type after the role map, ancestors' types."""
        tree = self.root.get("/StructTreeRoot")
        if tree is None:
            return
        roles = tree.get("/RoleMap", Dictionary())

        def walk(kid, above):
            if isinstance(kid, Array):
                for part in kid:
                    yield from walk(part, above)
            elif isinstance(kid, Dictionary) and "/S" in kid:
                kind = kid.S
                for _ in range(8):
                    if str(kind)[1:] in STANDARD_TYPES or kind not in roles:
                        break
                    kind = roles[kind]
                kind = str(kind)[1:]
                yield kid, kind, above
                yield from walk(kid.get("/K", Array()), above + [kind])

        yield from walk(tree.get("/K", Array()), [])

    def fonts(self):
        return [o for o in self.dictionaries if o.get("/Type") == "/Font"]

    def file_specs(self):
        return [o for o in self.dictionaries if "/EF" in o]


def children(element):
    kids = element.get("/K", Array())
    return [k for k in (kids if isinstance(kids, Array) else [kids]) if isinstance(k, Dictionary) and "/S" in k]


def text_of(xml, path):
    return [e.text or "" for e in xml.iterfind(path, NAMESPACES)] if xml is not None else []


# ---- ISO 19005-3: the file


@clause(A, "6.1.2", "the header stands at byte 0, with a comment of four bytes above 127 after it")
def header(f):
    if not re.match(rb"%PDF-1\.[0-7]\r?\n%[\x80-\xff]{4}", f.data):
        yield f"begins with {f.data[:16]!r}"


@clause(A, "6.1.3", "the trailer has an ID and no Encrypt; nothing follows the last end-of-file mark")
def trailer(f):
    if len(f.pdf.trailer.get("/ID", Array())) != 2:
        yield "no ID of two strings"
    if "/Encrypt" in f.pdf.trailer:
        yield "encrypted"
    if not re.search(rb"%%EOF\r?\n?\Z", f.data):
        yield "bytes after the last %%EOF"


@clause(A, "6.1.7", "no stream lies in another file; only filters of ISO 32000-1 without LZW and Crypt")
def streams(f):
    allowed = {"/FlateDecode", "/ASCIIHexDecode", "/ASCII85Decode", "/RunLengthDecode", "/CCITTFaxDecode", "/JBIG2Decode", "/DCTDecode", "/JPXDecode"}
    for stream in (o for o in f.dictionaries if isinstance(o, Stream)):
        if {"/F", "/FFilter", "/FDecodeParms"} & set(stream.keys()):
            yield "a stream names an external file"
        filters = stream.get("/Filter", Array())
        for one in filters if isinstance(filters, Array) else [filters]:
            if str(one) not in allowed:
                yield f"filter {one}"


@clause(A, "6.1.8", "names are UTF-8")
def names(f):
    for item in f.dictionaries:
        for key in item.keys():
            try:
                key.encode("utf-8")
            except UnicodeError:
                yield f"name {key!r}"


@clause(A, "6.1.12", "no Perms")
def permissions(f):
    if "/Perms" in f.root:
        yield "the catalog has Perms"


@clause(A, "6.1.13", "pages of 3 to 14400 units, strings of at most 32767 bytes, names of 127, at most 28 nested q")
def limits(f):
    for page in f.pdf.pages:
        left, bottom, right, top = (float(v) for v in page.mediabox)
        if not (3 <= right - left <= 14400 and 3 <= top - bottom <= 14400):
            yield f"a page of {right - left} by {top - bottom}"
    for item in f.dictionaries:
        for key, value in item.items():
            if len(key.encode()) - 1 > 127 or isinstance(value, Name) and len(str(value).encode()) - 1 > 127:
                yield f"a long name: {key}"
            if isinstance(value, String) and len(bytes(value)) > 32767:
                yield f"a long string in {key}"
    for where, _, operations in f.contents:
        depth = most = 0
        for operation in operations:
            depth += {"q": 1, "Q": -1}.get(str(operation.operator), 0)
            most = max(most, depth)
        if most > 28 or depth != 0:
            yield f"{where}: q nested {most} deep, {depth} left open"


# ---- ISO 19005-3: graphics and fonts


@clause(A, "6.2.3", "one output intent GTS_PDFA1 with an ICC profile of version 4 at most whose colour space has as many components as N says")
def output_intent(f):
    intents = [i for i in f.root.get("/OutputIntents", Array()) if i.get("/S") == "/GTS_PDFA1"]
    if len(intents) != 1:
        yield f"{len(intents)} output intents GTS_PDFA1"
    for intent in intents:
        profile = intent.get("/DestOutputProfile")
        if not isinstance(profile, Stream):
            yield "no profile"
            continue
        data = profile.read_bytes()
        size, version = struct.unpack(">I", data[:4])[0], data[8]
        components = {b"RGB ": 3, b"GRAY": 1, b"CMYK": 4}.get(data[16:20])
        if size != len(data) or data[36:40] != b"acsp" or version > 4:
            yield f"no ICC profile: {size} bytes told, {len(data)} there, version {version}"
        if components != int(profile.get("/N", 0)):
            yield f"N {profile.get('/N')} for {data[16:20]!r}"


@clause(A, "6.2.4", "device colours are those of the output intent: grey or RGB, never CMYK")
def colours(f):
    for where, _, operations in f.contents:
        if any(str(o.operator) in ("k", "K") for o in operations):
            yield f"{where} sets CMYK"
        for o in operations:
            if str(o.operator) in ("cs", "CS") and o.operands[0] == "/DeviceCMYK":
                yield f"{where} sets DeviceCMYK"
    for image in (o for o in f.dictionaries if o.get("/Subtype") == "/Image"):
        if image.get("/ColorSpace") == "/DeviceCMYK":
            yield "an image in CMYK"


@clause(A, "6.2.5", "graphics states without transfer functions (TR, TR2 but Default) and HTP")
def graphics_states(f):
    for state in (o for o in f.dictionaries if o.get("/Type") == "/ExtGState"):
        if "/TR" in state or state.get("/TR2", Name.Default) != Name.Default or "/HTP" in state:
            yield "a transfer function or HTP"


@clause(A, "6.2.8", "images without Alternates, OPI and Interpolate")
def images(f):
    for image in (o for o in f.dictionaries if o.get("/Subtype") == "/Image"):
        if "/Alternates" in image or "/OPI" in image or image.get("/Interpolate", False):
            yield "an image with Alternates, OPI or Interpolate"


@clause(A, "6.2.9", "no reference XObjects, no PostScript, no OPI")
def x_objects(f):
    for item in f.dictionaries:
        if item.get("/Subtype") == "/PS" or item.get("/Subtype2") == "/PS":
            yield "PostScript"
    for form in f.forms:
        if {"/Ref", "/OPI", "/PS"} & set(form.keys()):
            yield "a form XObject that refers outside"


@clause(A, "6.2.10", "blend modes of ISO 32000-1")
def blend_modes(f):
    modes = set("Normal Compatible Multiply Screen Overlay Darken Lighten ColorDodge ColorBurn HardLight SoftLight Difference Exclusion Hue Saturation Color Luminosity".split())
    for state in (o for o in f.dictionaries if "/BM" in o):
        if str(state.BM)[1:] not in modes:
            yield f"blend mode {state.BM}"


@clause(A, "6.2.11.3", "composite fonts: the same character collection twice, a map from CID to glyph, CMap Identity-H or -V")
def composite_fonts(f):
    for font in (o for o in f.fonts() if o.get("/Subtype") == "/Type0"):
        if font.get("/Encoding") not in ("/Identity-H", "/Identity-V"):
            yield f"{font.get('/BaseFont')}: encoding {font.get('/Encoding')}"
        for below in font.get("/DescendantFonts", Array()):
            system = below.get("/CIDSystemInfo", Dictionary())
            if (bytes(system.get("/Registry", String(""))), bytes(system.get("/Ordering", String("")))) != (b"Adobe", b"Identity"):
                yield f"{font.get('/BaseFont')}: another collection than the CMap's"
            if below.get("/Subtype") == "/CIDFontType2" and "/CIDToGIDMap" not in below:
                yield f"{font.get('/BaseFont')}: no CIDToGIDMap"


@clause(A, "6.2.11.4", "every font's program is in the file")
def embedded(f):
    fonts = f.fonts()
    if not fonts:
        yield "no font at all"
    for font in fonts:
        if font.get("/Subtype") in ("/Type0", "/Type3"):
            continue
        descriptor = font.get("/FontDescriptor", Dictionary())
        if not {"/FontFile", "/FontFile2", "/FontFile3"} & set(descriptor.keys()):
            yield f"{font.get('/BaseFont')} is not embedded"


@clause(A, "6.2.11.7", "every font has a ToUnicode map, and none maps to U+0000, U+FEFF or U+FFFE")
def unicode_maps(f):
    for font in f.fonts():
        if str(font.get("/Subtype")).startswith("/CIDFont"):
            continue
        if "/ToUnicode" not in font:
            yield f"{font.get('/BaseFont')} has no ToUnicode"
            continue
        for line in re.findall(rb"<[0-9A-Fa-f]+>\s*<([0-9A-Fa-f]+)>", font.ToUnicode.read_bytes()):
            if line.upper() in (b"0000", b"FEFF", b"FFFE"):
                yield f"{font.get('/BaseFont')} maps to U+{line.decode()}"


@clause(A, "6.2.11.8", "no text shows the glyph .notdef")
def notdef(f):
    for where, holder, operations in f.contents:
        fonts = holder.get("/Resources", Dictionary()).get("/Font", Dictionary())
        two_bytes = False
        for o in operations:
            if str(o.operator) == "Tf":
                two_bytes = fonts.get(str(o.operands[0]), Dictionary()).get("/Subtype") == "/Type0"
            if str(o.operator) not in ("Tj", "TJ") or not two_bytes:
                continue
            shown = o.operands[0]
            for part in shown if isinstance(shown, (Array, list)) else [shown]:
                if isinstance(part, String):
                    codes = bytes(part)
                    if any(codes[k : k + 2] == b"\0\0" for k in range(0, len(codes), 2)):
                        yield f"{where} shows .notdef"


# ---- ISO 19005-3: what a reader may do, what the file says of itself


@clause(A, "6.3", "annotations are links, shown in print, without appearance of their own")
def annotations(f):
    for page in f.pdf.pages:
        for note in page.get("/Annots", Array()):
            if note.get("/Subtype") != "/Link":
                yield f"an annotation {note.get('/Subtype')}"
            # 1 invisible, 2 hidden, 4 print, 32 no view, 256 toggle no view
            if int(note.get("/F", 0)) & 4 == 0 or int(note.get("/F", 0)) & (1 | 2 | 32 | 256):
                yield f"flags {note.get('/F')}"


@clause(A, "6.4", "no forms")
def forms(f):
    if "/AcroForm" in f.root:
        yield "a form"


@clause(A, "6.5", "actions go to a place of this file, and nothing else; none is triggered")
def actions(f):
    for item in f.dictionaries:
        if "/AA" in item:
            yield "a triggered action"
        for key in ("/A", "/OpenAction"):
            action = item.get(key)
            if isinstance(action, Dictionary) and "/S" in action and action.S != "/GoTo":
                yield f"action {action.S}"


@clause(A, "6.6.2", "XMP without bytes and encoding in its packet; what no predefined schema has is described in an extension schema")
def metadata(f):
    xml = f.metadata()
    if xml is None:
        yield "no metadata"
        return
    packet = re.search(rb"<\?xpacket begin=[^>]*\?>", f.root.Metadata.read_bytes())
    if packet is None or b"bytes=" in packet.group() or b"encoding=" in packet.group():
        yield "the packet's header"
    described = {}
    for schema in xml.iterfind(".//ext:schemas/rdf:Bag/rdf:li", NAMESPACES):
        uri = "".join(text_of(schema, "schema:namespaceURI"))
        described.setdefault(uri, set()).update(text_of(schema, ".//property:name"))
    for holder in xml.iterfind(".//rdf:RDF/rdf:Description", NAMESPACES):
        for item in holder:
            tag = etree.QName(item)
            if tag.localname not in PREDEFINED.get(tag.namespace, set()) | described.get(tag.namespace, set()):
                yield f"{item.tag} is not described"


@clause(A, "6.6.3", "the information dictionary and the metadata agree on title, author, keywords and program")
def information(f):
    xml, info = f.metadata(), f.pdf.docinfo
    for key, path in (
        ("/Title", ".//dc:title/rdf:Alt/rdf:li"),
        ("/Author", ".//dc:creator/rdf:Seq/rdf:li"),
        ("/Keywords", ".//pdf:Keywords"),
        ("/Creator", ".//xmp:CreatorTool"),
    ):
        if str(info.get(key, "")) != ", ".join(text_of(xml, path)):
            yield f"{key}: {info.get(key)} is not {text_of(xml, path)}"


@clause(A, "6.6.4", "part 3, conformance A")
def identification(f):
    found = text_of(f.metadata(), ".//pdfaid:part") + text_of(f.metadata(), ".//pdfaid:conformance")
    if found != ["3", "A"]:
        yield f"{found}"


@clause(A, "6.7.2", "marked as tagged")
def marked(f):
    if not f.root.get("/MarkInfo", Dictionary()).get("/Marked", False):
        yield "MarkInfo does not say Marked"


@clause(A, "6.7.3", "a structure tree whose types are standard or mapped to standard ones")
def structure(f):
    if not f.elements:
        yield "no structure tree"
    for _, kind, _ in f.elements:
        if kind not in STANDARD_TYPES:
            yield f"type {kind}"


@clause(A, "6.7.4", "the catalog's Lang is a language tag")
def language(f):
    if not re.fullmatch(r"[A-Za-z]{2,3}(-[A-Za-z0-9]{2,8})*", str(f.root.get("/Lang", ""))):
        yield f"Lang {f.root.get('/Lang')}"


@clause(A, "6.8", "attachments: F, UF and Desc, a relationship, MIME type and date, and each in the document's AF")
def attachments(f):
    associated = {o.objgen for o in f.root.get("/AF", Array())}
    listed = list(pikepdf.NameTree(f.root.Names.EmbeddedFiles).items()) if "/EmbeddedFiles" in f.root.get("/Names", {}) else []
    if len(listed) != len(f.file_specs()):
        yield f"{len(f.file_specs())} files, {len(listed)} by name"
    for spec in f.file_specs():
        name = str(spec.get("/UF", spec.get("/F", "?")))
        if not {"/F", "/UF", "/Desc"} <= set(spec.keys()):
            yield f"{name}: F, UF or Desc is missing"
        if spec.get("/AFRelationship") not in ("/Source", "/Data", "/Alternative", "/Supplement", "/Unspecified"):
            yield f"{name}: relationship {spec.get('/AFRelationship')}"
        if spec.objgen not in associated:
            yield f"{name} is not associated with the document"
        for stream in spec.EF.values():
            if not re.fullmatch(r"/[a-z]+/[a-z0-9.+-]+", str(stream.get("/Subtype", ""))):
                yield f"{name}: type {stream.get('/Subtype')}"
            if "/ModDate" not in stream.get("/Params", Dictionary()):
                yield f"{name}: no date"


@clause(A, "6.9", "no optional content")
def optional_content(f):
    if "/OCProperties" in f.root:
        yield "optional content"


@clause(A, "6.10", "no alternate presentations, no steps between pages; 6.11: no requirements")
def presentations(f):
    if "/AlternatePresentations" in f.root.get("/Names", Dictionary()) or "/Requirements" in f.root:
        yield "alternate presentations or requirements"
    if any("/PresSteps" in page for page in f.pdf.pages):
        yield "a page with steps"


# ---- ISO 14289-1


@clause(UA, "5", "the metadata says part 1")
def ua_identification(f):
    if text_of(f.metadata(), ".//pdfuaid:part") != ["1"]:
        yield "no pdfuaid:part of 1"


@clause(UA, "7.1", "everything painted is tagged or an artifact; Suspects is false; a title, and the window shows it")
def painted(f):
    if f.root.get("/MarkInfo", Dictionary()).get("/Suspects", False):
        yield "Suspects"
    if not any(t.strip() for t in text_of(f.metadata(), ".//dc:title/rdf:Alt/rdf:li")):
        yield "no dc:title"
    if not f.root.get("/ViewerPreferences", Dictionary()).get("/DisplayDocTitle", False):
        yield "DisplayDocTitle is not true"
    paint = set("Tj TJ ' \" S s f F f* B B* b b* sh Do".split())
    for where, holder, operations in f.contents:
        if where != "a form XObject":
            depth = 0
            for o in operations:
                operator = str(o.operator)
                depth += {"BDC": 1, "BMC": 1, "EMC": -1}.get(operator, 0)
                if operator in paint and depth == 0:
                    yield f"{where}: {operator} outside of marked content"
            if depth != 0:
                yield f"{where}: marked content left open"


@clause(UA, "7.2", "a language for all text")
def ua_language(f):
    yield from language(f)


@clause(UA, "7.3", "every figure has an alternative text of more than a word")
def figures(f):
    for element, kind, _ in f.elements:
        if kind == "Figure" and len(str(element.get("/Alt", "")).split()) < 2:
            yield f"a figure with the text {element.get('/Alt')!r}"


@clause(UA, "7.4", "headings begin with H1 and skip no level")
def headings(f):
    levels = [int(kind[1]) for _, kind, _ in f.elements if re.fullmatch("H[1-6]", kind)]
    if levels[:1] != [1]:
        yield f"the first heading is {levels[:1]}"
    for before, level in zip(levels, levels[1:]):
        if level > before + 1:
            yield f"H{level} after H{before}"


@clause(UA, "7.5", "tables: TH with a scope in each, rows of one width, cells in rows")
def tables(f):
    for element, kind, above in f.elements:
        if kind in ("TH", "TD") and above[-1:] != ["TR"]:
            yield f"{kind} in {above[-1:]}"
        if kind == "TR" and above[-1] not in ("Table", "THead", "TBody", "TFoot"):
            yield f"TR in {above[-1]}"
        if kind != "Table":
            continue
        rows = []
        for part in children(element):
            rows += [part] if part.S == "/TR" else children(part)
        taken, widths = Counter(), set()
        heads = 0
        for index, row in enumerate(rows):
            width = taken[index]
            for cell in children(row):
                attributes = cell.get("/A", Array())
                attributes = list(attributes) if isinstance(attributes, Array) else [attributes]
                value = {str(k): v for a in attributes if isinstance(a, Dictionary) for k, v in a.items()}
                across, down = int(value.get("/ColSpan", 1)), int(value.get("/RowSpan", 1))
                width += across
                for later in range(index + 1, index + down):
                    taken[later] += across
                if cell.S == "/TH":
                    heads += 1
                    if value.get("/Scope") not in ("/Column", "/Row", "/Both"):
                        yield "a TH without scope"
            widths.add(width)
        if heads == 0:
            yield "a table without TH"
        if len(widths) != 1:
            yield f"a table with rows of {sorted(widths)} cells"


@clause(UA, "7.6", "lists: LI in L alone, Lbl and LBody in LI")
def lists(f):
    for _, kind, above in f.elements:
        if kind == "LI" and above[-1:] != ["L"] or kind == "LBody" and above[-1:] != ["LI"]:
            yield f"{kind} in {above[-1:]}"
        if above[-1:] == ["L"] and kind not in ("LI", "Caption", "L"):
            yield f"{kind} in L"


@clause(UA, "7.8", "running heads and feet are artifacts of the kind Pagination, Header or Footer")
def running(f):
    for n, page in enumerate(f.pdf.pages):
        kinds = Counter()
        for o in pikepdf.parse_content_stream(page):
            if str(o.operator) == "BDC" and o.operands[0] == "/Artifact" and isinstance(o.operands[1], Dictionary):
                kinds[str(o.operands[1].get("/Subtype"))] += 1
                if "/Subtype" in o.operands[1] and o.operands[1].get("/Type") != "/Pagination":
                    yield f"page {n + 1}: a {o.operands[1].Subtype} that is not Pagination"
        if kinds["/Footer"] == 0:
            yield f"page {n + 1} has no foot"


@clause(UA, "7.11", "attachments have F and UF")
def ua_files(f):
    for spec in f.file_specs():
        if not {"/F", "/UF"} <= set(spec.keys()):
            yield "F or UF is missing"


@clause(UA, "7.16", "no encryption")
def security(f):
    if f.pdf.is_encrypted:
        yield "encrypted"


@clause(UA, "7.17", "bookmarks, each with a title and a place")
def outlines(f):
    with f.pdf.open_outline() as outline:
        todo = list(outline.root)
    if not todo:
        yield "no bookmarks"
    while todo:
        item = todo.pop()
        todo += item.children
        if not item.title.strip() or item.destination is None and item.action is None:
            yield f"bookmark {item.title!r} leads nowhere"


@clause(UA, "7.18", "links are in Link elements with a text, and tabs follow the structure")
def links(f):
    places = sum(len(page.get("/Annots", Array())) for page in f.pdf.pages)
    told = sum(
        1
        for element, kind, _ in f.elements
        if kind == "Link"
        for kid in (element.K if isinstance(element.get("/K"), Array) else [element.get("/K")])
        if isinstance(kid, Dictionary) and kid.get("/Type") == "/OBJR"
    )
    if places != told:
        yield f"{places} links, {told} in Link elements"
    for page in f.pdf.pages:
        notes = page.get("/Annots", Array())
        if len(notes) > 0 and page.get("/Tabs") != "/S":
            yield "a page with links without Tabs S"
        if any(not str(note.get("/Contents", "")).strip() for note in notes):
            yield "a link without Contents"


@clause(UA, "7.20", "no reference XObjects")
def ua_references(f):
    if any("/Ref" in form for form in f.forms):
        yield "a reference XObject"


@clause(UA, "7.21", "fonts as in 6.2.11 of ISO 19005-3: embedded, mapped to Unicode, no .notdef")
def ua_fonts(f):
    for check in (embedded, unicode_maps, notdef):
        yield from check(f)


def judge(data):
    """What is not met: (standard, clause, sentence)."""
    f = File(data)
    return [(standard, number, fault) for standard, number, _, check in CHECKS for fault in check(f)]


# ---- the checks checked


def first(f, kind):
    return next(element for element, of, _ in f.elements if of == kind)


def wounds():
    """Name, the clauses that must find it, and what breaks the file."""
    yield "not tagged", "6.7.2", lambda f: f.root.MarkInfo.__setitem__("/Marked", False)
    yield "no language", "6.7.4", lambda f: f.root.__delitem__("/Lang")
    yield "no structure", "6.7.3", lambda f: f.root.__delitem__("/StructTreeRoot")
    yield "a type of its own", "6.7.3", lambda f: first(f, "P").__setitem__("/S", Name("/Paragraph"))
    yield "no output intent", "6.2.3", lambda f: f.root.__delitem__("/OutputIntents")
    yield "no file association", "6.8", lambda f: f.root.__delitem__("/AF")
    yield "no relationship", "6.8", lambda f: f.file_specs()[0].__delitem__("/AFRelationship")
    yield "no date of an attachment", "6.8", lambda f: f.file_specs()[0].EF.F.Params.__delitem__("/ModDate")
    yield "a name lost", "7.11", lambda f: f.file_specs()[0].__delitem__("/UF")
    yield "no title in the window", "7.1", lambda f: f.root.ViewerPreferences.__setitem__("/DisplayDocTitle", False)
    yield "a picture without words", "7.3", lambda f: first(f, "Figure").__delitem__("/Alt")
    yield "a heading too deep", "7.4", lambda f: first(f, "H2").__setitem__("/S", Name("/H4"))
    yield "no first heading", "7.4", lambda f: first(f, "H1").__setitem__("/S", Name("/H3"))
    yield "a head without scope", "7.5", lambda f: first(f, "TH").__delitem__("/A")
    yield "a cell too few", "7.5", lambda f: first(f, "TR").K.__delitem__(0)
    yield "a body outside its item", "7.6", lambda f: first(f, "LI").__setitem__("/S", Name("/P"))
    yield "no bookmarks", "7.17", lambda f: f.root.__delitem__("/Outlines")
    yield "an action that runs", "6.5", lambda f: f.root.__setitem__("/OpenAction", f.pdf.make_indirect(Dictionary(S=Name.JavaScript, A=Dictionary(S=Name.JavaScript, JS=String("1")))))
    yield "a font not embedded", "6.2.11.4", lambda f: [o.__delitem__(k) for o in f.dictionaries for k in ("/FontFile2", "/FontFile3") if k in o]
    yield "no text of its glyphs", "6.2.11.7", lambda f: [o.__delitem__("/ToUnicode") for o in f.dictionaries if "/ToUnicode" in o]
    yield "another identification", "6.6.4", lambda f: f.root.Metadata.write(f.root.Metadata.read_bytes().replace(b"conformance>A<", b"conformance>B<"))
    yield "no identification", "5", lambda f: f.root.Metadata.write(f.root.Metadata.read_bytes().replace(b"pdfuaid:part>1<", b"pdfuaid:part>2<"))
    yield "a property of its own", "6.6.2", lambda f: f.root.Metadata.write(f.root.Metadata.read_bytes().replace(b"<pdfuaid:part>1</pdfuaid:part>", b"<pdfuaid:part>1</pdfuaid:part><pdfuaid:rev>1</pdfuaid:rev>"))
    yield "another title", "6.6.3", lambda f: f.pdf.docinfo.__setitem__("/Title", String("Other"))
    yield "paint without a tag", "7.1", lambda f: f.pdf.pages[0].contents_add(b"0 0 m 9 9 l S")
    yield "CMYK", "6.2.4", lambda f: f.pdf.pages[0].contents_add(b"0 0 0 1 k")
    yield "a form", "6.4", lambda f: f.root.__setitem__("/AcroForm", Dictionary(Fields=Array()))
    yield "optional content", "6.9", lambda f: f.root.__setitem__("/OCProperties", Dictionary())
    yield "a note on the page", "6.3", lambda f: f.pdf.pages[0].__setitem__("/Annots", Array([f.pdf.make_indirect(Dictionary(Type=Name.Annot, Subtype=Name.Text, Rect=Array([0, 0, 9, 9])))]))
    yield "a page as large as a house", "6.1.13", lambda f: f.pdf.pages[0].__setitem__("/MediaBox", Array([0, 0, 20000, 20000]))


def break_it(path):
    """Breaks copies of a sound file. Each must be found out by the clause it breaks."""
    sound = path.read_bytes()
    missed, count = [], 0
    for name, number, wound in wounds():
        f = File(sound)
        wound(f)
        copy = io.BytesIO()
        f.pdf.save(copy, static_id=True)
        count += 1
        if number not in {found for _, found, _ in judge(copy.getvalue())}:
            missed.append(f"{name}: {number} does not find it")
    for name, number, data in (
        ("bytes after the end", "6.1.3", sound + b"more"),
        ("bytes before the beginning", "6.1.2", b"\n" + sound),
    ):
        count += 1
        if number not in {found for _, found, _ in judge(data)}:
            missed.append(f"{name}: {number} does not find it")
    copy = io.BytesIO()
    with pikepdf.open(io.BytesIO(sound)) as pdf:
        pdf.save(copy, encryption=pikepdf.Encryption(owner="owner", user="", R=6))
    count += 1
    if "7.16" not in {found for _, found, _ in judge(copy.getvalue())}:
        missed.append("encryption: 7.16 does not find it")
    return missed, count


def main(arguments):
    if arguments[:1] == ["--broken"]:
        missed, count = break_it(Path(arguments[1]))
        for line in missed:
            print(line)
        print(f"{count - len(missed)} of {count} broken copies found out")
        return bool(missed)
    bad = 0
    for name in arguments:
        found = Counter(judge(Path(name).read_bytes()))
        bad += bool(found)
        for (standard, number, fault), times in found.items():
            print(f"{Path(name).name}: {standard}, {number}: {fault}" + (f" ({times} times)" if times > 1 else ""))
    for standard in (A, UA):
        print(f"{standard}: {', '.join(number for of, number, _, _ in CHECKS if of == standard)}")
    print(f"{len(arguments) - bad} of {len(arguments)} files meet these clauses, as far as clauses.py checks them")
    return bool(bad)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
