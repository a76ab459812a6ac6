"""Reads every file of a finished set with libraries that share no code with the program.

usage: python check_set.py DIR [--self-test]

DIR holds set.json and the files it names. For every file: its SHA-256; closed and consistently wound by
trimesh; triangles, vertices, Euler number, shells, chambers, volume, area and box against set.json; accepted by
manifold3d. STL: size, header, attribute words, normals. OBJ: unit, groups, materials, material file. 3MF:
strict reading by lib3mf without a warning, manifold and oriented, unit, title, a side for every triangle; the
schema in 3mf-core.xsd. Formats against each other: same corners, same sides.

--self-test damages copies of the smallest stage in many ways and passes when every damage is found: it shows
that the checks can fail.

Prints one line a file, then `N passed, N failed`; the exit status is 1 when anything failed.
"""

import collections
import hashlib
import json
import math
import pathlib
import re
import shutil
import struct
import sys
import tempfile
import traceback
import zipfile

import lib3mf
import lxml.etree
import manifold3d
import numpy as np
import scipy.spatial
import trimesh

RELATIVE = 1e-4  # of volume and area
BOX_MM = 1e-4  # 32 bits resolve 8e-6 mm at 100 mm
SIDES = ["side-a", "side-b", "fixture"]
HERE = pathlib.Path(__file__).parent
CORE = "{http://schemas.microsoft.com/3dmanufacturing/core/2015/02}"


class Faults:
    """What is wrong with one file."""

    def __init__(self):
        self.found = []

    def need(self, right, text):
        if not right:
            self.found.append(text)

    def near(self, value, expected, tolerance, name):
        right = math.isfinite(value) and abs(value - expected) <= tolerance
        self.need(right, f"{name} is {value:.9g}, set.json says {expected:.9g}")


def no_constant(name):
    raise ValueError(f"set.json holds {name}, which is not JSON")


def arrays(path, form):
    """Vertices and triangles as trimesh reads them.

    Corners at one place are joined for STL, which has no vertices, and for OBJ, which trimesh splits at each
    change of material; never for 3MF, where the specification judges by index.
    """
    options = {"skip_materials": True} if form == "obj" else {}
    mesh = trimesh.load(path, file_type=form, force="mesh", process=False, **options)
    if form == "3mf":
        return np.asarray(mesh.vertices), np.asarray(mesh.faces)
    vertices, inverse = np.unique(mesh.vertices, axis=0, return_inverse=True)
    return vertices, inverse.reshape(-1)[mesh.faces]


def check_shape(vertices, faces, solid, faults):
    """The mesh against the figures of set.json."""
    mesh = trimesh.Trimesh(vertices, faces, process=False)
    faults.need(len(faces) == solid["triangles"], f"{len(faces)} triangles, set.json says {solid['triangles']}")
    faults.need(len(vertices) == solid["vertices"], f"{len(vertices)} vertices, set.json says {solid['vertices']}")
    faults.need(mesh.is_watertight, "not closed (trimesh)")
    faults.need(mesh.is_winding_consistent, "winding not consistent (trimesh)")
    faults.need(mesh.euler_number == solid["euler"], f"Euler number {mesh.euler_number}, set.json says {solid['euler']}")
    faults.near(mesh.volume, solid["volume_mm3"], RELATIVE * abs(solid["volume_mm3"]), "volume in mm3")
    faults.near(mesh.area, solid["area_mm2"], RELATIVE * abs(solid["area_mm2"]), "area in mm2")
    for end in range(2):
        for axis in range(3):
            name = f"{('least', 'greatest')[end]} {'xyz'[axis]} in mm"
            faults.near(mesh.bounds[end][axis], solid["bbox_mm"][end][axis], BOX_MM, name)
    labels = trimesh.graph.connected_component_labels(mesh.face_adjacency, node_count=len(faces))
    corners = vertices[faces] - vertices.mean(axis=0)
    sixths = np.einsum("ij,ij->i", corners[:, 0], np.cross(corners[:, 1], corners[:, 2])) / 6.0
    volumes = np.bincount(labels, weights=sixths)
    faults.need(len(volumes) == solid["shells"], f"{len(volumes)} shells, set.json says {solid['shells']}")
    chambers = int((volumes < 0.0).sum())
    faults.need(chambers == solid["chambers"], f"{chambers} chambers, set.json says {solid['chambers']}")

    as_read = manifold3d.Mesh(vertices.astype(np.float32), faces.astype(np.uint32))
    body = manifold3d.Manifold(as_read)
    faults.need(body.status() == manifold3d.Error.NoError, f"manifold3d says {body.status()}")
    if body.status() == manifold3d.Error.NoError:
        faults.near(body.volume(), solid["volume_mm3"], RELATIVE * abs(solid["volume_mm3"]), "volume by manifold3d")
        euler = 2 - 2 * body.genus()
        faults.need(euler == solid["euler"], f"Euler number {euler} by manifold3d, set.json says {solid['euler']}")


def check_stl(path, faults):
    """The layout of the bytes; returns the corners of the facets."""
    data = path.read_bytes()
    faults.need(len(data) >= 84 and not data[:5].lower() == b"solid", "the header begins with solid or is missing")
    count = struct.unpack("<I", data[80:84])[0]
    faults.need(len(data) == 84 + 50 * count, f"{len(data)} bytes for {count} facets")
    facet = np.dtype([("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("word", "<u2")])
    facets = np.frombuffer(data, dtype=facet, offset=84, count=min(count, (len(data) - 84) // 50))
    faults.need(not facets["word"].any(), "attribute words are not 0")
    corners = facets["corners"].astype(np.float64)
    cross = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    length = np.linalg.norm(cross, axis=1)
    real = length > 0.0
    along = np.einsum("ij,ij->i", cross[real] / length[real, None], facets["normal"][real].astype(np.float64))
    faults.need((along > 1.0 - 1e-6).all(), f"{int((along <= 1.0 - 1e-6).sum())} normals do not agree with their corners")
    faults.need(not (np.signbit(facets["corners"]) & (facets["corners"] == 0)).any(), "a coordinate is -0.0")
    return facets["corners"]


def check_obj(path, folder, faults):
    """Groups and materials; returns corners and the side of every triangle."""
    vertices, faces, sides = [], [], []
    library, group, material = None, None, None
    unit = False
    for line in path.read_text(encoding="utf-8").splitlines():
        word, _, rest = line.partition(" ")
        if word == "#":
            unit = unit or rest == "units: millimetre"
        elif word == "mtllib":
            library = rest
        elif word == "g":
            group, material = rest, None
        elif word == "usemtl":
            material = rest
        elif word == "v":
            vertices.append([float(c) for c in rest.split()])
        elif word == "f":
            faces.append([int(i) - 1 for i in rest.split()])
            sides.append(group if group == material else None)
        elif word != "o":
            faults.need(False, f"a line begins {word[:20]!r}")
    faults.need(unit, "no comment says that the unit is millimetre")
    counts = collections.Counter(sides)
    faults.need(set(counts) <= set(SIDES), f"groups and materials are {sorted(map(str, counts))}, not {SIDES}")
    order = [s for s, previous in zip(sides, [None] + sides) if s != previous]
    faults.need(len(order) == len(set(order)), "triangles are not sorted by group")
    materials = {}
    if library is None or "/" in library or not (folder / library).is_file():
        faults.need(False, f"the material file {library!r} is missing")
    else:
        name = None
        for line in (folder / library).read_text(encoding="utf-8").splitlines():
            word, _, rest = line.partition(" ")
            if word == "newmtl":
                name = rest
            elif word == "Kd":
                materials[name] = [float(c) for c in rest.split()]
        colours = all(len(c) == 3 and all(0.0 <= x <= 1.0 for x in c) for c in materials.values())
        faults.need(colours, "a colour of the material file is not three numbers from 0 to 1")
        missing = [s for s in counts if s not in materials]
        faults.need(not missing, f"the material file has no {missing}")
    return np.array(vertices)[np.array(faces)], sides


def check_3mf(path, title, faults):
    """Schema and strict reading; returns corners and the side of every triangle."""
    with zipfile.ZipFile(path) as package:
        faults.need(package.testzip() is None, "a part of the container is damaged")
        stamps = {part.date_time for part in package.infolist()}
        faults.need(stamps == {(1980, 1, 1, 0, 0, 0)}, f"time stamps are {sorted(stamps)}")
        model = lxml.etree.fromstring(package.read("3D/3dmodel.model"), lxml.etree.XMLParser(huge_tree=True))
    schema = lxml.etree.XMLSchema(lxml.etree.parse(HERE / "3mf-core.xsd"))
    faults.need(schema.validate(model), f"schema: {schema.error_log.last_error}")
    faults.need(model.get("unit") == "millimeter", f"unit is {model.get('unit')}")
    given = {m.get("name"): m.text or "" for m in model.iter(CORE + "metadata")}
    # Control characters cannot stand in XML; the writer puts U+FFFD in their place.
    expected = re.sub("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\ufffe\uffff]", "\ufffd", title)
    faults.need(given.get("Title") == expected, f"the title is {given.get('Title')!r}, set.json says {title!r}")
    faults.need(given.get("Application", "").startswith("stagewright "), "no metadata names the application")

    model = lib3mf.get_wrapper().CreateModel()
    reader = model.QueryReader("3mf")
    reader.SetStrictModeActive(True)
    reader.ReadFromFile(str(path))
    for k in range(reader.GetWarningCount()):
        faults.need(False, f"lib3mf warns: {reader.GetWarning(k)}")
    groups = model.GetBaseMaterialGroups()
    names = {}
    while groups.MoveNext():
        group = groups.GetCurrentBaseMaterialGroup()
        for p in group.GetAllPropertyIDs():
            names[(group.GetResourceID(), p)] = group.GetName(p)
    meshes = model.GetMeshObjects()
    faults.need(meshes.Count() == 1, f"{meshes.Count()} mesh objects")
    faults.need(model.GetBuildItems().Count() == 1, f"{model.GetBuildItems().Count()} build items")
    corners, sides = [], []
    while meshes.MoveNext():
        mesh = meshes.GetCurrentMeshObject()
        faults.need(mesh.IsValid(), "lib3mf calls the mesh not valid")
        faults.need(mesh.IsManifoldAndOriented(), "lib3mf: not manifold and oriented")
        vertices = np.array([list(v.Coordinates) for v in mesh.GetVertices()], dtype=np.float32)
        faces = np.array([list(t.Indices) for t in mesh.GetTriangleIndices()])
        corners.append(vertices[faces])
        for p in mesh.GetAllTriangleProperties():
            same = len(set(p.PropertyIDs)) == 1
            sides.append(names.get((p.ResourceID, p.PropertyIDs[0])) if same else None)
    faults.need(set(sides) <= set(SIDES), f"{sum(s not in SIDES for s in sides)} triangles have no side")
    return np.concatenate(corners), sides


def check_file(folder, stage, form, title, corners, faults):
    """One file of a stage; `corners` collects what the formats hold, to compare them."""
    path = (folder / stage["files"][form]).resolve()
    if not path.is_relative_to(folder.resolve()) or not path.is_file():
        faults.need(False, "no such file in the folder of the set")
        return
    digest = hashlib.sha256(path.read_bytes()).hexdigest()
    faults.need(digest == stage["sha256"].get(form), f"SHA-256 is {digest}, set.json says {stage['sha256'].get(form)}")
    if form == "stl":
        corners[form] = (check_stl(path, faults), None)
    elif form == "obj":
        corners[form] = check_obj(path, folder, faults)
    elif form == "3mf":
        corners[form] = check_3mf(path, title, faults)
    else:
        return  # a material file: looked at with its OBJ file
    vertices, faces = arrays(path, form)
    check_shape(vertices, faces, stage["solid"], faults)
    if form != "stl" and "stl" in corners:
        compare(corners["stl"][0], corners[form][0], form, faults)
    if form == "3mf" and "obj" in corners:
        ours, theirs = collections.Counter(corners["3mf"][1]), collections.Counter(corners["obj"][1])
        faults.need(ours == theirs, f"triangles by side are {dict(ours)}, in the OBJ file {dict(theirs)}")


def compare(stl, other, form, faults):
    """The same facets as in the STL file: bit for bit in 3MF, to a nanometre and in any order in OBJ."""
    if stl.shape != other.shape:
        faults.need(False, f"{len(other)} facets, the STL file has {len(stl)}")
    elif form == "3mf":
        faults.need(np.array_equal(stl, other), "facets are not those of the STL file")
    else:
        ours, theirs = (c.reshape(-1, 9).astype(np.float64) for c in (other, stl))
        distance, place = scipy.spatial.cKDTree(theirs).query(ours)
        same = distance.max() < 1e-5 and len(np.unique(place)) == len(place)  # nine roundings to 1e-6 mm
        faults.need(same, f"facets are not those of the STL file: {distance.max():.3g} mm apart")


def check_entry(stage, number, density, faults):
    """The entry of set.json itself; `density` in g/cm3."""
    faults.need(stage["index"] == number, f"index is {stage['index']}, the place in the set {number}")
    faults.need(0.0 <= stage["tau"] <= 1.0, f"tau is {stage['tau']}")
    rows = stage["placement"]
    faults.need(len(rows) == 3 and all(len(r) == 4 for r in rows), "placement is not 3 x 4")
    linear = np.array(rows, dtype=float)[:, :3]
    scale = np.cbrt(np.linalg.det(linear))
    similar = scale > 0 and np.allclose(linear @ linear.T, scale**2 * np.eye(3), atol=1e-9 * scale**2)
    faults.need(similar, "placement is not a scaled proper rotation with a shift")
    mass = stage["solid"]["volume_mm3"] * density / 1000.0  # g/cm3 times mm3
    faults.near(stage["solid"]["mass_g"], mass, 1e-9 * mass, "volume times density, against the mass in g,")
    for finding in stage["findings"]:
        keys = {"check", "verdict", "value", "limit", "unit", "place_mm", "source"}
        faults.need(keys <= set(finding), f"a finding has no {sorted(keys - set(finding))}")
        faults.need(finding.get("verdict") in ("pass", "caution", "fail"), f"verdict is {finding.get('verdict')}")


def check_set(folder, say=print):
    """All of a set; returns (passed, failed)."""
    passed = failed = 0

    def judge(name, act):
        nonlocal passed, failed
        faults = Faults()
        try:
            act(faults)
        except Exception as error:  # an outside library that gives up is a failure of the file
            place = traceback.extract_tb(error.__traceback__)[-1]
            faults.need(False, f"{type(error).__name__}: {str(error)[:200]} ({pathlib.Path(place.filename).name}:{place.lineno})")
        if faults.found:
            failed += 1
            say(f"FAILED {name}: " + "; ".join(faults.found))
        else:
            passed += 1
            say(f"ok     {name}")

    try:
        record = json.loads((folder / "set.json").read_text(encoding="utf-8"), parse_constant=no_constant)
        stages, title = record["stages"], record["title"]
        density = record["profile"]["density_g_cm3"]
    except (OSError, ValueError, KeyError) as error:
        say(f"FAILED set.json: {type(error).__name__}: {error}")
        return 0, 1
    if not stages:
        say("FAILED set.json: no stage")
        return 0, 1
    for failure in record.get("failures", []):
        failed += 1
        say(f"FAILED set.json: a stage was not made: {failure}")
    for number, stage in enumerate(stages, start=1):
        corners = {}
        judge(f"set.json, stage {number}", lambda f: check_entry(stage, number, density, f))
        order = sorted(stage["files"], key=lambda form: (["stl", "obj", "3mf"] + [form]).index(form))
        for form in order:
            judge(stage["files"][form], lambda f: check_file(folder, stage, form, title, corners, f))
    return passed, failed


def self_test(folder):
    """Damages copies of the smallest stage; returns (damages found, damages missed)."""
    from damage import damages

    found = missed = 0
    record = json.loads((folder / "set.json").read_text(encoding="utf-8"))
    record["stages"] = sorted(record["stages"], key=lambda stage: stage["solid"]["triangles"])[:1]
    record["stages"][0]["index"] = 1
    for name, act in damages(record["stages"][0]):
        with tempfile.TemporaryDirectory() as temporary:
            copy = pathlib.Path(temporary) / "set"
            copy.mkdir()
            for file in folder.iterdir():
                if file.suffix == ".mtl" or file.name in record["stages"][0]["files"].values():
                    shutil.copy(file, copy / file.name)
            changed = json.loads(json.dumps(record))
            stage = changed["stages"][0]
            act(copy, stage)
            if name != "a changed byte":
                for form, file in stage["files"].items():
                    if (copy / file).is_file():
                        stage["sha256"][form] = hashlib.sha256((copy / file).read_bytes()).hexdigest()
            (copy / "set.json").write_text(json.dumps(changed), encoding="utf-8")
            lines = []
            _, failed = check_set(copy, lines.append)
        if (failed > 0) == (name != "no damage"):
            found += 1
            print(f"ok     self-test: {name}")
        else:
            missed += 1
            print(f"FAILED self-test: {name}: {failed} files failed", *lines, sep="\n       ")
    return found, missed


def main():
    arguments = [a for a in sys.argv[1:] if a != "--self-test"]
    if len(arguments) != 1:
        sys.exit(__doc__)
    folder = pathlib.Path(arguments[0])
    act = self_test if "--self-test" in sys.argv else check_set
    passed, failed = act(folder)
    print(f"{passed} passed, {failed} failed")
    sys.exit(1 if failed or not passed else 0)


if __name__ == "__main__":
    main()
