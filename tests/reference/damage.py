"""Ways to damage the files of a stage, each of which check_set.py must find.

A damage is (name, act); `act(folder, stage)` changes the files in `folder` or the entry `stage` of set.json.
SHA-256 sums are put right afterwards, so that the damage itself has to be found.
"""

import struct
import zipfile


def damages(stage):
    """All damages that fit the formats of this stage; `no damage` must pass."""
    yield "no damage", lambda folder, stage: None
    for key, change in [
        ("triangles", lambda v: v + 1),
        ("vertices", lambda v: v - 1),
        ("volume_mm3", lambda v: v * 1.001),
        ("area_mm2", lambda v: v * 1.001),
        ("euler", lambda v: v + 2),
        ("shells", lambda v: v + 1),
        ("chambers", lambda v: v + 1),
        ("bbox_mm", lambda v: [[v[0][0] - 0.01, v[0][1], v[0][2]], v[1]]),
        ("mass_g", lambda v: -v),
    ]:
        yield f"a wrong {key} in set.json", _entry(key, change)
    yield "a mirrored placement", _mirrored
    if "stl" in stage["files"]:
        yield "a changed byte", _bytes("stl", lambda d: d[:100] + bytes([d[100] ^ 1]) + d[101:])
        yield "a facet left out", _bytes("stl", lambda d: d[:80] + _count(d, -1) + d[84:-50])
        yield "a lost end of the file", _bytes("stl", lambda d: d[:-7])
        yield "a turned facet", _bytes("stl", lambda d: d[:96] + d[108:120] + d[96:108] + d[120:])
        yield "a wrong normal", _bytes("stl", lambda d: d[:84] + struct.pack("<3f", 0, 0, 0) + d[96:])
        yield "a moved corner", _bytes("stl", lambda d: d[:96] + struct.pack("<f", 0.25) + d[100:])
    if "obj" in stage["files"]:
        yield "no unit in OBJ", _text("obj", "# units: millimetre\n", "")
        yield "a group without material", _text("obj", "usemtl side-a\n", "")
        yield "an unknown material", _text("obj", "usemtl side-a\n", "usemtl gloss\n")
        yield "no material file", _no_material_file
        yield "a face of OBJ turned", _last_face
    if "3mf" in stage["files"]:
        yield "another unit in 3MF", _model('unit="millimeter"', 'unit="inch"')
        yield "another title in 3MF", _model('<metadata name="Title">', '<metadata name="Title">x')
        yield "a triangle without side", _model(' pid="1" p1="0"/>', ' pid="1" p1="7"/>')
        yield "another side", _model(' p1="0"/>', ' p1="2"/>')
        yield "a tag the schema does not know", _model("</vertices>", "<vertex2/></vertices>")
        yield "materials after the object", _materials_last
        yield "a vertex twice in a triangle", _model('<triangle v1="0"', '<triangle v1="1"')
        yield "no build item", _model('<item objectid="2"', '<item objectid="9"')
        yield "a time stamp", _stamped


def _entry(key, change):
    def act(_, stage):
        stage["solid"][key] = change(stage["solid"][key])
    return act


def _mirrored(_, stage):
    stage["placement"][0] = [-v for v in stage["placement"][0]]


def _count(data, by):
    return struct.pack("<I", struct.unpack("<I", data[80:84])[0] + by)


def _bytes(form, change):
    def act(folder, stage):
        path = folder / stage["files"][form]
        path.write_bytes(change(path.read_bytes()))
    return act


def _replaced(data, old, new):
    old, new = old.encode(), new.encode()
    if old not in data:
        raise SystemExit(f"damage.py: {old!r} does not occur in the file, so nothing can be damaged")
    return data.replace(old, new, 1)


def _text(form, old, new):
    return _bytes(form, lambda d: _replaced(d, old, new))


def _last_face(folder, stage):
    path = folder / stage["files"]["obj"]
    head, _, last = path.read_text(encoding="utf-8").rstrip("\n").rpartition("\nf ")
    path.write_text(head + "\nf " + " ".join(reversed(last.split())) + "\n", encoding="utf-8")


def _no_material_file(folder, _):
    for file in folder.glob("*.mtl"):
        file.unlink()


def _rewritten(change, stamp=(1980, 1, 1, 0, 0, 0)):
    def act(folder, stage):
        path = folder / stage["files"]["3mf"]
        with zipfile.ZipFile(path) as package:
            parts = [(p.filename, package.read(p)) for p in package.infolist()]
        with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as package:
            for name, data in parts:
                if name == "3D/3dmodel.model":
                    data = change(data)
                package.writestr(zipfile.ZipInfo(name, stamp), data)
    return act


def _model(old, new):
    return _rewritten(lambda d: _replaced(d, old, new))


def _after(data):
    start, end = data.index(b"<basematerials"), data.index(b"</basematerials>") + len(b"</basematerials>")
    materials = data[start:end]
    data = data[:start] + data[end:]
    return data.replace(b"</resources>", materials + b"</resources>", 1)


_materials_last = _rewritten(_after)
_stamped = _rewritten(lambda d: d, (2024, 2, 29, 12, 0, 0))
