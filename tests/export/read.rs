//! What the readers make of good and odd files.

use super::{container, corner, obj, stl, three_mf};
use stagewright::export::{MeshFormat, ReadError, ReadNote, detect_format, read_mesh};
use stagewright::geom::Vec3;
use stagewright::mesh::shapes::sphere_shell;
use stagewright::mesh::{Side, TriMesh, measure};

fn volume(mesh: &TriMesh) -> f64 {
    measure::enclosed_volume(mesh).unwrap()
}

#[test]
fn what_is_written_is_read_back() {
    let mesh = sphere_shell(20.3, 18.3, 3);
    for (format, bytes, exact) in [
        (MeshFormat::Stl, stl(&mesh), false),
        (MeshFormat::Obj, obj(&mesh), true),
        (MeshFormat::ThreeMf, three_mf(&mesh, "shell"), true),
    ] {
        assert_eq!(detect_format(&bytes, None).unwrap(), format);
        let back = read_mesh(&bytes, format).unwrap();
        assert_eq!((back.format, back.bodies), (format, 1));
        assert_eq!(back.mesh.triangles.len(), mesh.triangles.len());
        assert_eq!(back.mesh.positions.len(), mesh.positions.len());
        assert!((volume(&back.mesh) / volume(&mesh) - 1.0).abs() < 1e-6, "{format:?}");
        if exact {
            assert_eq!(back.mesh.triangles, mesh.triangles, "{format:?}"); // STL numbers vertices anew
        }
        assert!(back.mesh.sides.iter().all(|s| *s == Side::Fixture));
    }
}

const FACETS: &str = "facet normal 0 0 -1 outer loop vertex 0 0 0 vertex 0 6 0 vertex 6 0 0 endloop endfacet
facet normal 0 -1 0 outer loop vertex 0 0 0 vertex 6 0 0 vertex 0 0 6 endloop endfacet
facet normal -1 0 0 outer loop vertex 0 0 0 vertex 0 0 6 vertex 0 6 0 endloop endfacet
facet normal nan nan nan outer loop vertex 6 0 0 vertex 0 6 0 vertex 0 0 6e0 endloop endfacet";

#[test]
fn text_stl_of_every_habit_is_read() {
    let one = format!("solid\n{FACETS}\nendsolid\n");
    let upper = format!("\u{feff} SOLID a solid name\r\n{}\r\nENDSOLID a\r\n", FACETS.to_uppercase());
    let two = format!("solid a\n{FACETS}\nendsolid a\nsolid b\n{}\nendsolid b", FACETS.replace('6', "9"));
    for (text, bodies, triangles, expected) in
        [(&one, 1, 4, 36.0), (&upper, 1, 4, 36.0), (&two, 2, 8, 36.0 + 121.5)]
    {
        assert_eq!(detect_format(text.as_bytes(), None).unwrap(), MeshFormat::Stl);
        let back = read_mesh(text.as_bytes(), MeshFormat::Stl).unwrap();
        assert_eq!((back.bodies, back.mesh.triangles.len()), (bodies, triangles));
        let signed = measure::signed_mass(&back.mesh).volume_mm3;
        assert!((signed - expected).abs() < 1e-9, "{signed}");
        assert_eq!(back.notes, [ReadNote::UnitAssumed(MeshFormat::Stl)]);
    }
    let cut = format!("solid a\n{FACETS}\n");
    assert!(read_mesh(cut.as_bytes(), MeshFormat::Stl).unwrap().notes.contains(&ReadNote::NoEndSolid));
}

#[test]
fn a_wrong_line_of_text_stl_is_named() {
    let text = format!("solid a\n{FACETS}\nendsolid a").replace("6e0", "six");
    let message = read_mesh(text.as_bytes(), MeshFormat::Stl).unwrap_err().to_string();
    assert_eq!(message, "line 5: a number is expected here, found \"six\"");
    let text =
        format!("solid a\n{FACETS}\nendsolid a").replace("vertex 0 9", "x").replacen("endloop", "vertex", 1);
    let message = read_mesh(text.as_bytes(), MeshFormat::Stl).unwrap_err().to_string();
    assert_eq!(message, "line 2: `endloop` is expected after three vertices, found \"vertex\"");
}

#[test]
fn a_binary_stl_that_begins_with_solid_is_binary() {
    let mut bytes = stl(&corner());
    bytes[..80].fill(b' ');
    bytes[..12].copy_from_slice(b"solid thing\n");
    assert!((volume(&read_mesh(&bytes, MeshFormat::Stl).unwrap().mesh) - 36.0).abs() < 1e-9);
}

#[test]
fn binary_stl_of_another_size_than_it_says() {
    let mut bytes = stl(&corner());
    bytes.extend([0; 7]);
    assert_eq!(read_mesh(&bytes, MeshFormat::Stl).unwrap().notes[1], ReadNote::TrailingBytes(7));
    bytes.truncate(84 + 3 * 50 + 10);
    let cut = read_mesh(&bytes, MeshFormat::Stl);
    assert!(matches!(cut, Err(ReadError::Truncated { facets: 4, needed: 284, found: 244 })));
    bytes[80..84].fill(0xff);
    assert!(matches!(read_mesh(&bytes, MeshFormat::Stl), Err(ReadError::Truncated { facets: u32::MAX, .. })));
    assert!(matches!(read_mesh(&[7; 40], MeshFormat::Stl), Err(ReadError::Truncated { .. })));
}

#[test]
fn numbers_that_are_no_coordinates_are_refused_with_their_place() {
    let mut bytes = stl(&corner());
    bytes[84 + 50 + 12..][..4].copy_from_slice(&f32::NAN.to_le_bytes());
    let message = read_mesh(&bytes, MeshFormat::Stl).unwrap_err().to_string();
    assert_eq!(message, "facet 2: the coordinate NaN mm is not within +-1000000 mm");
    let message = read_mesh(b"v 0 0 0\nv 1 inf 0\n", MeshFormat::Obj).unwrap_err().to_string();
    assert_eq!(message, "line 2: the coordinate inf mm is not within +-1000000 mm");
    assert!(read_mesh(b"v 0 0 1e300\n", MeshFormat::Obj).is_err());
}

#[test]
fn obj_polygons_negative_indices_and_continued_lines() {
    // A cube of 2 mm from six quads, in two objects, with texture indices and a stray vertex.
    let text = "# made by hand\r\nmtllib none.mtl\no one\nv 99 99 99\nv 0 0 0\nv 2 0 0\nv 2 2 0\nv 0 2 0
v 0 0 2 1.0 0.5 0.5\nv 2 0 2\nv 2 2 2\nv 0 2 2\nvt 0 0\nvn 0 0 1\ng a b
f 2/1/1 5/1/1 4/1/1 3/1/1\nf 6//1 7//1 8//1 9//1\no two\nf -8 -7 -3 -4\nf 3 4 8 7 # side\nf 4 5 9 \\\n8\nf 5 2 6 9\nl 1 2 3\n";
    assert_eq!(detect_format(text.as_bytes(), None).unwrap(), MeshFormat::Obj);
    let back = read_mesh(text.as_bytes(), MeshFormat::Obj).unwrap();
    assert_eq!((back.bodies, back.mesh.triangles.len(), back.mesh.positions.len()), (2, 12, 8));
    assert!((volume(&back.mesh) - 8.0).abs() < 1e-12);
    let expected = [ReadNote::UnitAssumed(MeshFormat::Obj), ReadNote::Polygons(6), ReadNote::NotFaces(1)];
    assert_eq!(back.notes, expected);
}

#[test]
fn obj_vertices_split_for_texture_are_joined() {
    let text = "f 1 2 3\nf 4 5 6\nv 0 0 0\nv 1 0 0\nv 0 1 0\nv 1 0 0\nv 1 1 0\nv 0 1 -0\n";
    let back = read_mesh(text.as_bytes(), MeshFormat::Obj).unwrap();
    assert_eq!(back.mesh.triangles, [[0, 1, 2], [1, 3, 2]]);
    assert!(back.notes.contains(&ReadNote::Joined(2)));
}

#[test]
fn obj_faces_that_name_nothing_are_refused_with_their_line() {
    for (text, message) in [
        ("v 0 0 0\nf 1 2 3\n", "line 2: vertex 3 is named, but there are 1 vertices (counted from 1)"),
        ("v 0 0 0\nf 0 1 1\n", "line 2: vertex 0 is named, but there are 1 vertices (counted from 1)"),
        ("v 0 0 0\nf 1 -2 1\n", "line 2: vertex -2 is named, but there are 1 vertices (counted from 1)"),
        (
            "f 1 99999999999 1\n",
            "line 1: vertex 99999999999 is named, but there are 0 vertices (counted from 1)",
        ),
        (
            "f 1 -9223372036854775808 1\n",
            "line 1: vertex -9223372036854775808 is named, but there are 0 vertices (counted from 1)",
        ),
        ("v 0 0 0\nf 1 1\n", "line 2: a face needs three corners or more, found \"2 corners\""),
        ("v 0 zero 0\n", "line 1: a vertex needs three numbers, found \"zero\""),
        ("v 0 0\n", "line 1: a vertex needs three numbers, found \"\""),
        ("v 0 0 0\n", "the OBJ file holds no triangle"),
    ] {
        assert_eq!(read_mesh(text.as_bytes(), MeshFormat::Obj).unwrap_err().to_string(), message);
    }
}

const CORE: &str = "http://schemas.microsoft.com/3dmanufacturing/core/2015/02";
const MESH: &str = r#"<mesh><vertices><vertex x="0" y="0" z="0"/><vertex x="6" y="0" z="0"/><vertex x="0" y="6" z="0"/>
<vertex x="0" y="0" z="6"></vertex></vertices><triangles><triangle v1="0" v2="2" v3="1"/>
<triangle v1="0" v2="1" v3="3"/><triangle v1="0" v2="3" v3="2"/><triangle v1="1" v2="2" v3="3"/></triangles></mesh>"#;

fn model(attributes: &str, resources: &str, build: &str) -> String {
    format!(
        "<?xml version=\"1.0\"?><model {attributes} xmlns=\"{CORE}\" \
         xmlns:p=\"http://schemas.microsoft.com/3dmanufacturing/production/2015/06\">\
         <resources>{resources}</resources><build>{build}</build></model>"
    )
}

fn read_model(text: &str) -> Result<stagewright::export::Imported, ReadError> {
    read_mesh(&container(&[("3D/3dmodel.model", text)]), MeshFormat::ThreeMf)
}

#[test]
fn components_transforms_and_units_of_3mf() {
    let resources = format!(
        r#"<object id="1">{MESH}</object><object id="7" type="support">{MESH}</object>
        <object id="2"><components><component objectid="1"/>
        <component objectid="1" transform="2 0 0 0 2 0 0 0 2 10 0 0"/></components></object>"#
    );
    let build = r#"<item objectid="2" transform="-1 0 0 0 1 0 0 0 1 100 0 0"/><item objectid="1"/><item objectid="7"/>"#;
    let back = read_model(&model("unit=\"inch\"", &resources, build)).unwrap();
    // Volumes in cubic inches: 36 and 8 * 36, both mirrored, and 36.
    let inch3 = 25.4_f64.powi(3);
    assert!((volume(&back.mesh) / inch3 - (36.0 + 288.0 + 36.0)).abs() < 1e-9);
    assert_eq!((back.bodies, back.mesh.triangles.len()), (3, 12));
    let expected = [
        ReadNote::UnitGiven { unit: "inch", factor: 25.4 },
        ReadNote::LeftOut { kind: "support", count: 1 },
        ReadNote::Mirrored(2),
    ];
    assert_eq!(back.notes, expected);
    // The larger copy: x from 10 to 22 in the object, mirrored and shifted to 100 - 22 .. 100 - 10.
    let x: Vec<f64> = back.mesh.positions[4..8].iter().map(|p| p.x / 25.4).collect();
    assert!((x[0] - 90.0).abs() < 1e-12 && (x[1] - 78.0).abs() < 1e-12, "{x:?}");
}

#[test]
fn parts_of_the_production_extension_are_followed_in_their_own_unit() {
    let root = model(
        "unit=\"millimeter\" requiredextensions=\"p\"",
        r#"<object id="1"><components><component objectid="1" p:path="/3D/parts/One.model" transform="1 0 0 0 1 0 0 0 1 5 0 0"/></components></object>"#,
        r#"<item objectid="1"/>"#,
    );
    let inner = model("unit=\"centimeter\"", &format!("<object id=\"1\">{MESH}</object>"), "");
    let rels = r#"<Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships"><Relationship Id="a" Target="/x/Root.model" Type="http://schemas.microsoft.com/3dmanufacturing/2013/01/3dmodel"/></Relationships>"#;
    let bytes = container(&[("_rels/.rels", rels), ("X/root.model", &root), ("3D/parts/one.model", &inner)]);
    let back = read_mesh(&bytes, MeshFormat::ThreeMf).unwrap();
    assert!((volume(&back.mesh) - 36_000.0).abs() < 1e-6);
    assert!((back.mesh.positions[0] - Vec3::new(5.0, 0.0, 0.0)).norm() < 1e-12);
}

#[test]
fn a_tag_of_an_extension_is_not_taken_for_one_of_the_core() {
    let resources = format!(
        r#"<s:object id="1" xmlns:s="urn:x"><s:mesh/></s:object><object id="1">{}</object>"#,
        MESH.replace(
            "<triangles>",
            r#"<s:vertices xmlns:s="urn:x"><s:vertex x="nan" y="0"/></s:vertices><triangles>"#
        )
    );
    let back =
        read_model(&model("requiredextensions=\"s q\"", &resources, "<item objectid=\"1\"/>")).unwrap();
    assert!((volume(&back.mesh) - 36.0).abs() < 1e-9);
    assert!(back.notes.contains(&ReadNote::Extensions("s, q".into())));
    let elsewhere = model("requiredextensions=\"s\"", "<object id=\"1\"/>", "<item objectid=\"1\"/>");
    assert!(matches!(read_model(&elsewhere), Err(ReadError::OnlyExtensions { .. })));
}

#[test]
fn broken_3mf_files_are_told_apart() {
    let object = format!("<object id=\"1\">{MESH}</object>");
    let item = "<item objectid=\"1\"/>";
    let message = |text: &str| read_model(text).unwrap_err().to_string();
    let good = model("", &object, item);
    assert!(read_model(&good).is_ok());
    assert!(
        message(&good.replace("x=\"6\"", "x=\"six\""))
            .contains("a coordinate must be a number, found \"six\"")
    );
    assert!(message(&good.replace("x=\"6\"", "x=\"NaN\"")).contains("the coordinate NaN mm"));
    assert!(message(&good.replace("x=\"6\"", "")).contains("a vertex needs x, y and z"));
    assert!(
        message(&good.replace("v3=\"3\"", "v3=\"4\""))
            .contains("vertex 4 is named, but there are 4 vertices")
    );
    assert!(message(&good.replace("v3=\"3\"", "v3=\"-1\"")).contains("a whole number from 0"));
    assert!(message(&good.replace("v3=\"3\"", "v3=\"99999999999\"")).contains("a whole number from 0"));
    assert!(message(&good.replace("</build>", "")).contains("3D/3dmodel.model, byte"));
    assert!(message(&good[..good.len() / 2]).contains("3D/3dmodel.model"));
    assert!(message(&model("unit=\"ell\"", &object, item)).contains("the unit must be micron"));
    assert!(message(&model("", &object, "<item objectid=\"2\"/>")).contains("no object with this id"));
    assert!(message(&model("", &object, "")).contains("holds no triangle"));
    let flat = "<item objectid=\"1\" transform=\"1 0 0 0 1 0 0 0 0 0 0 0\"/>";
    assert!(message(&model("", &object, flat)).contains("must not flatten"));
    let itself = "<object id=\"1\"><components><component objectid=\"1\"/></components></object>";
    assert!(message(&model("", itself, item)).contains("defined before"));
    assert!(
        message(&good.replace("<model", "<!DOCTYPE x [<!ENTITY a \"b\">]><model")).contains("document type")
    );
    assert!(message("<x/>").contains("the first tag must be `model`"));
    let none = read_mesh(&container(&[("a", "b")]), MeshFormat::ThreeMf).unwrap_err().to_string();
    assert_eq!(none, "the 3MF container has no part \"3D/3dmodel.model\"");
    let garbage = read_mesh(b"PK\x03\x04 and then nothing", MeshFormat::ThreeMf).unwrap_err().to_string();
    assert!(garbage.starts_with("the 3MF container cannot be read"));
}

#[test]
fn formats_are_known_by_content_before_their_name() {
    assert_eq!(detect_format(&stl(&corner()), Some("obj")).unwrap(), MeshFormat::Stl);
    assert_eq!(detect_format(&three_mf(&corner(), "x"), Some("stl")).unwrap(), MeshFormat::ThreeMf);
    assert_eq!(detect_format(&obj(&corner()), Some("stl")).unwrap(), MeshFormat::Obj);
    assert_eq!(detect_format(b"# only a comment", Some("OBJ")).unwrap(), MeshFormat::Obj);
    assert_eq!(detect_format(&[1; 100], Some("stl")).unwrap(), MeshFormat::Stl);
    assert!(matches!(detect_format(b"hello", Some("txt")), Err(ReadError::UnknownFormat { .. })));
    assert!(matches!(detect_format(b"hello", None), Err(ReadError::UnknownFormat { .. })));
    assert!(matches!(detect_format(b"", Some("stl")), Err(ReadError::Empty)));
    assert!(matches!(read_mesh(b"", MeshFormat::Obj), Err(ReadError::Empty)));
}
