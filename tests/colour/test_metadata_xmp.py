import io
import xml.etree.ElementTree as ElementTree

import numpy as np
import png
import pytest
import tifffile

from skyoptics.colour import images, metadata
from skyoptics.errors import DomainError

XML = "{http://www.w3.org/XML/1998/namespace}"
WORDS = {
    "title": "Bogen über <Zürich> & “Umland”",
    "caption": "Hauptregenbogen, 41,9°. Größe: 0,5 mm.",
    "alt_text": "Hauptregenbogen vor grauem Himmel.",
    "author": "Ána Ñuño",
    "rights": "CC BY 4.0",
    "software": "skyoptics 0",
    "lang": "de",
}


def alternatives(packet, name):
    """Return language → text of a property, read by an XML parser; namespaces as published by Dublin Core and the IPTC."""
    prefix, local = name.split(":")
    space = {
        "dc": "http://purl.org/dc/elements/1.1/",
        "Iptc4xmpCore": "http://iptc.org/std/Iptc4xmpCore/1.0/xmlns/",
    }[prefix]
    rdf = "{http://www.w3.org/1999/02/22-rdf-syntax-ns#}"
    body = ElementTree.fromstring(packet[packet.index("<x:xmpmeta") : packet.index("<?xpacket end")])
    return {item.get(XML + "lang"): item.text for item in body.iterfind(f".//{{{space}}}{local}//{rdf}li")}


def test_xmp_holds_the_words_by_language():
    packet = metadata.xmp(**WORDS)
    assert alternatives(packet, "dc:title") == {"x-default": WORDS["title"]}
    assert alternatives(packet, "dc:description") == {"x-default": WORDS["caption"], "de": WORDS["caption"]}
    assert alternatives(packet, "Iptc4xmpCore:AltTextAccessibility")["de"] == WORDS["alt_text"]
    assert alternatives(packet, "dc:rights") == {"x-default": "CC BY 4.0"}
    assert alternatives(packet, "dc:creator") == {None: "Ána Ñuño"}
    assert packet.startswith('<?xpacket begin="\ufeff" id="W5M0MpCehiHzreSzNTczkc9d"?>')  # ISO 16684-1:2019, 7.3.2


def test_xmp_leaves_out_what_is_missing_and_folders():
    packet = metadata.xmp(title="From /home/somebody/bow.toml")
    assert alternatives(packet, "dc:title")["x-default"] == "From bow.toml"
    assert "description" not in packet
    assert "rights" not in packet
    assert "creator" not in packet
    with pytest.raises(DomainError, match="has no place in metadata"):
        metadata.xmp(title="bell \x07")


def test_words_of_people_are_utf8_chunks():
    entries = metadata.picture_metadata(
        software="skyoptics", version="0", title="Bow", description="Größe", author="A. B.", rights="CC BY 4.0"
    )
    assert list(entries) == ["Title", "Description", "Author", "Copyright", "Software"]
    entries[metadata.XMP] = metadata.xmp(**WORDS)
    data = images.png_bytes(np.zeros((2, 3, 3)), text=entries)
    found = {}
    for kind, content in png.Reader(file=io.BytesIO(data)).chunks():  # pypng checks lengths and checksums
        if kind in (b"iTXt", b"tEXt"):
            key, _, rest = content.partition(b"\0")
            found[key.decode("latin-1")] = kind, rest
    assert {key for key, (kind, _) in found.items() if kind == b"tEXt"} == {"Software"}
    # W3C PNG third edition, 11.3.3.4: compression flag and method, language tag and translated keyword, both ended by null
    assert {key: rest[:4] for key, (kind, rest) in found.items() if kind == b"iTXt"} == dict.fromkeys(
        ["Title", "Description", "Author", "Copyright", "XML:com.adobe.xmp"], b"\0\0\0\0"
    )
    assert found["Description"][1][4:].decode("utf-8") == "Größe"
    packet = found["XML:com.adobe.xmp"][1][4:].decode("utf-8")
    assert alternatives(packet, "dc:description")["de"] == WORDS["caption"]


def test_tiff_holds_xmp_and_copyright(tmp_path):
    text = {"Description": "Größe", "Copyright": "CC BY 4.0 Ñ", metadata.XMP: metadata.xmp(**WORDS)}
    images.write_tiff(tmp_path / "a.tiff", np.zeros((2, 3, 3)), text=text)
    with tifffile.TiffFile(tmp_path / "a.tiff") as file:
        tags = file.pages[0].tags
        packet = bytes(tags[700].value).decode("utf-8")
        assert alternatives(packet, "Iptc4xmpCore:AltTextAccessibility")["x-default"] == WORDS["alt_text"]
        assert "Größe" in file.pages[0].description.encode().decode("unicode_escape")
        rights = tags[33432].value
        assert (rights if isinstance(rights, str) else rights.decode("utf-8")) == "CC BY 4.0 Ñ"
