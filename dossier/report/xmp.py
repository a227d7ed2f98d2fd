"""The XMP packet of the record copy: PDF/A and PDF/UA identification, title, dates, and the dossier's own fields.

One description per schema with its namespaces declared in place, and every schema that PDF/A does not know
declared as an extension schema (ISO 19005-3, 6.6.2; ISO 14289-1, 5).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final
from xml.sax.saxutils import escape

DOSSIER_NAMESPACE: Final = "urn:stability-dossier:1"
_HEAD: Final = (
    '<?xpacket begin="\ufeff" id="W5M0MpCehiHzreSzNTczkc9d"?>\n<x:xmpmeta xmlns:x="adobe:ns:meta/">\n'
    ' <rdf:RDF xmlns:rdf="http://www.w3.org/1999/02/22-rdf-syntax-ns#">\n'
)
_TAIL: Final = ' </rdf:RDF>\n</x:xmpmeta>\n<?xpacket end="w"?>'


@dataclass(frozen=True, slots=True)
class Identity:
    """What the packet says of the document; `date` is an ISO date with time."""

    title: str
    author: str
    subject: str
    keywords: str
    program: str
    producer: str
    date: str
    number: str
    revision: str
    fingerprint: str


def packet(identity: Identity) -> bytes:
    """The whole packet for PDF/A-3a and PDF/UA-1."""
    body = "".join(
        (
            _description("pdfaid", "http://www.aiim.org/pdfa/ns/id/", {"part": "3", "conformance": "A"}),
            _description("pdfuaid", "http://www.aiim.org/pdfua/ns/id/", {"part": "1"}),
            _dublin_core(identity),
            _description(
                "pdf", "http://ns.adobe.com/pdf/1.3/", {"Producer": identity.producer, "Keywords": identity.keywords}
            ),
            _description(
                "xmp", "http://ns.adobe.com/xap/1.0/",
                {"CreatorTool": identity.program, "CreateDate": identity.date, "ModifyDate": identity.date,
                 "MetadataDate": identity.date},
            ),
            _description("dossier", DOSSIER_NAMESPACE, _own_fields(identity)),
            _extension_schemas(),
        )
    )  # fmt: skip
    return (_HEAD + body + _TAIL).encode("utf-8")


def _own_fields(identity: Identity) -> dict[str, str]:
    return {
        "documentNumber": identity.number,
        "revision": identity.revision,
        "projectSha256": identity.fingerprint,
    }


def _description(prefix: str, namespace: str, values: dict[str, str]) -> str:
    lines = "".join(f"   <{prefix}:{k}>{escape(v)}</{prefix}:{k}>\n" for k, v in values.items())
    return f'  <rdf:Description rdf:about="" xmlns:{prefix}="{namespace}">\n{lines}  </rdf:Description>\n'


def _dublin_core(identity: Identity) -> str:
    def alternative(text: str) -> str:
        return f'<rdf:Alt><rdf:li xml:lang="x-default">{escape(text)}</rdf:li></rdf:Alt>'

    creator = f"   <dc:creator><rdf:Seq><rdf:li>{escape(identity.author)}</rdf:li></rdf:Seq></dc:creator>\n"
    return (
        '  <rdf:Description rdf:about="" xmlns:dc="http://purl.org/dc/elements/1.1/">\n'
        f"   <dc:format>application/pdf</dc:format>\n   <dc:title>{alternative(identity.title)}</dc:title>\n"
        f"{creator if identity.author else ''}"
        f"   <dc:description>{alternative(identity.subject)}</dc:description>\n"
        "   <dc:language><rdf:Bag><rdf:li>en-GB</rdf:li></rdf:Bag></dc:language>\n  </rdf:Description>\n"
    )


def _extension_schemas() -> str:
    schemas = (
        _schema("PDF/UA Universal Accessibility Schema", "http://www.aiim.org/pdfua/ns/id/", "pdfuaid",
                (("part", "Integer", "internal", "Part of ISO 14289 that is followed"),)),
        _schema("Identification of a stability dossier", DOSSIER_NAMESPACE, "dossier",
                (("documentNumber", "Text", "external", "document number"),
                 ("revision", "Text", "external", "revision"),
                 ("projectSha256", "Text", "external", "SHA-256 of the project text"))),
    )  # fmt: skip
    return (
        '  <rdf:Description rdf:about="" xmlns:pdfaExtension="http://www.aiim.org/pdfa/ns/extension/" '
        'xmlns:pdfaSchema="http://www.aiim.org/pdfa/ns/schema#" '
        'xmlns:pdfaProperty="http://www.aiim.org/pdfa/ns/property#">\n   <pdfaExtension:schemas><rdf:Bag>\n'
        f"{''.join(schemas)}   </rdf:Bag></pdfaExtension:schemas>\n  </rdf:Description>\n"
    )


def _schema(title: str, namespace: str, prefix: str, properties: tuple[tuple[str, str, str, str], ...]) -> str:
    rows = "".join(
        f'      <rdf:li rdf:parseType="Resource"><pdfaProperty:name>{name}</pdfaProperty:name>'
        f"<pdfaProperty:valueType>{kind}</pdfaProperty:valueType><pdfaProperty:category>{category}"
        f"</pdfaProperty:category><pdfaProperty:description>{text}</pdfaProperty:description></rdf:li>\n"
        for name, kind, category, text in properties
    )
    return (
        f'    <rdf:li rdf:parseType="Resource">\n     <pdfaSchema:schema>{title}</pdfaSchema:schema>\n'
        f"     <pdfaSchema:namespaceURI>{namespace}</pdfaSchema:namespaceURI>\n"
        f"     <pdfaSchema:prefix>{prefix}</pdfaSchema:prefix>\n     <pdfaSchema:property><rdf:Seq>\n{rows}"
        "     </rdf:Seq></pdfaSchema:property>\n    </rdf:li>\n"
    )
