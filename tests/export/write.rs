//! The bytes the writers write.

use super::{corner, obj, part, stl, three_mf};
use stagewright::export::{
    ObjInfo, SideColours, ThreeMf, ThreeMfObject, WriteError, write_3mf, write_mtl, write_obj, write_stl,
};
use stagewright::geom::Vec3;
use stagewright::mesh::shapes::{icosphere, joined, on_side, sphere_shell};
use stagewright::mesh::{Side, TriMesh};
use std::io::{self, Cursor, Seek, SeekFrom, Write};

#[test]
fn a_corner_has_these_bytes_as_stl() {
    let bytes = stl(&corner());
    assert_eq!(bytes.len(), 84 + 4 * 50);
    assert_eq!(bytes[..80], [0; 80]);
    assert_eq!(bytes[80..84], [4, 0, 0, 0]);
    // First facet: corners 0, 2, 1, normal -z; 6.0 is 0x40c00000, -1.0 is 0xbf800000.
    let mut expected = [0_u8; 50];
    expected[8..12].copy_from_slice(&[0, 0, 0x80, 0xbf]); // normal z
    expected[28..32].copy_from_slice(&[0, 0, 0xc0, 0x40]); // second corner, y
    expected[36..40].copy_from_slice(&[0, 0, 0xc0, 0x40]); // third corner, x
    assert_eq!(bytes[84..134], expected);
    // Last facet: all three components of the normal are 1 / sqrt 3 = 0x3f13cd3a.
    assert_eq!(bytes[234..246], [0x3a, 0xcd, 0x13, 0x3f, 0x3a, 0xcd, 0x13, 0x3f, 0x3a, 0xcd, 0x13, 0x3f]);
}

#[test]
fn a_corner_has_this_text_as_obj_and_mtl() {
    let expected = "# Foyer shelf
# units: millimetre
mtllib 02-tau-0.410.mtl
o stage_2
v 0.000000 0.000000 0.000000
v 6.000000 0.000000 0.000000
v 0.000000 6.000000 0.000000
v 0.000000 0.000000 6.000000
g side-a
usemtl side-a
f 1 2 4
f 2 3 4
g side-b
usemtl side-b
f 1 3 2
g fixture
usemtl fixture
f 1 4 3
";
    assert_eq!(String::from_utf8(obj(&corner())).unwrap(), expected);
    let mut mtl = Vec::new();
    write_mtl(&SideColours::default(), &mut mtl).unwrap();
    // 0x1f / 255 = 31 / 255 = 0.1216, 0x7a = 122 / 255 = 0.4784, 0xe3 = 227 / 255 = 0.8902,
    // 0xc0 = 192 / 255 = 0.7529, 0x8f = 143 / 255 = 0.5608
    let text = String::from_utf8(mtl).unwrap();
    assert!(text.contains("newmtl side-a\nKd 0.1216 0.4784 0.4784\n"));
    assert!(text.contains("newmtl side-b\nKd 0.8902 0.7529 0.5608\n"));
    assert!(text.contains("newmtl fixture\n"));
}

#[test]
fn a_corner_has_this_text_as_3mf() {
    let bytes = three_mf(&corner(), "Foyer shelf");
    let version = env!("CARGO_PKG_VERSION");
    let expected = format!(
        r##"<?xml version="1.0" encoding="UTF-8"?>
<model unit="millimeter" xml:lang="en" xmlns="http://schemas.microsoft.com/3dmanufacturing/core/2015/02" xmlns:sw="urn:stagewright:metadata:1">
<metadata name="Title">Foyer shelf</metadata>
<metadata name="Description">Foyer shelf</metadata>
<metadata name="sw:tau">0.410</metadata>
<metadata name="Application">stagewright {version}</metadata>
<resources>
<basematerials id="1">
<base name="side-a" displaycolor="#1F7A7AFF"/>
<base name="side-b" displaycolor="#E3C08FFF"/>
<base name="fixture" displaycolor="#8A8F91FF"/>
</basematerials>
<object id="2" name="Foyer shelf" partnumber="02" type="model" pid="1" pindex="0">
<mesh>
<vertices>
<vertex x="0" y="0" z="0"/>
<vertex x="6" y="0" z="0"/>
<vertex x="0" y="6" z="0"/>
<vertex x="0" y="0" z="6"/>
</vertices>
<triangles>
<triangle v1="0" v2="2" v3="1" pid="1" p1="1"/>
<triangle v1="0" v2="1" v3="3" pid="1" p1="0"/>
<triangle v1="0" v2="3" v3="2" pid="1" p1="2"/>
<triangle v1="1" v2="2" v3="3" pid="1" p1="0"/>
</triangles>
</mesh>
</object>
</resources>
<build>
<item objectid="2" partnumber="02" />
</build>
</model>
"##
    );
    assert_eq!(part(&bytes, "3D/3dmodel.model"), expected);
    assert!(part(&bytes, "_rels/.rels").contains(r#"Target="/3D/3dmodel.model""#));
    assert!(part(&bytes, "[Content_Types].xml").contains(r#"Extension="model""#));
}

#[test]
fn the_container_holds_no_clock_and_no_machine() {
    let bytes = three_mf(&corner(), "x");
    let mut archive = zip::ZipArchive::new(Cursor::new(&bytes)).unwrap();
    assert_eq!(archive.len(), 3);
    for k in 0..3 {
        let entry = archive.by_index(k).unwrap();
        assert_eq!(entry.last_modified(), Some(zip::DateTime::default()));
        assert_eq!(entry.unix_mode().map(|m| m & 0o777), Some(0o644));
        assert_eq!(entry.compression(), zip::CompressionMethod::Deflated);
    }
    assert_eq!(archive.by_index(0).unwrap().name().unwrap(), "[Content_Types].xml");
}

#[test]
fn equal_meshes_give_equal_bytes() {
    let mesh = sphere_shell(20.3, 18.3, 5); // 40960 triangles: several chunks and buffers
    assert_eq!(stl(&mesh), stl(&mesh));
    assert_eq!(obj(&mesh), obj(&mesh));
    assert_eq!(three_mf(&mesh, "a"), three_mf(&mesh, "a"));
}

#[test]
fn stl_io_reads_back_every_facet() {
    let mesh = sphere_shell(20.3, 18.3, 3);
    let back = stl_io::read_stl(&mut Cursor::new(stl(&mesh))).unwrap();
    assert_eq!((back.vertices.len(), back.faces.len()), (mesh.positions.len(), mesh.triangles.len()));
    for (t, face) in back.faces.iter().enumerate() {
        let [a, b, c] = mesh.corners(t);
        let n = (b - a).cross(&(c - a)).normalize();
        for (k, p) in [a, b, c].into_iter().enumerate() {
            for axis in 0..3 {
                let q = back.vertices[face.vertices[k]].0[axis];
                assert!((f64::from(q) - p[axis]).abs() <= 1e-6, "facet {t}"); // half a step at 20 mm is 9.5e-7
                assert!((f64::from(face.normal.0[axis]) - n[axis]).abs() < 1e-5, "facet {t}");
            }
        }
    }
}

#[test]
fn minus_zero_does_not_split_a_vertex() {
    let mut mesh = corner();
    mesh.positions[0] = Vec3::new(-0.0, 0.0, -0.0);
    mesh.positions[1].y = -0.0;
    mesh.positions[3].x = -1e-60;
    let back = stl_io::read_stl(&mut Cursor::new(stl(&mesh))).unwrap();
    assert_eq!(back.vertices.len(), 4);
    assert!(!String::from_utf8(obj(&mesh)).unwrap().contains(" -0"));
    assert!(!part(&three_mf(&mesh, "x"), "3D/3dmodel.model").contains("\"-0\""));
}

#[test]
fn tobj_reads_back_the_groups_with_their_materials() {
    let shell = joined(&[
        on_side(&icosphere(20.0, 3), Side::A),
        on_side(&icosphere(8.0, 2), Side::B),
        on_side(&icosphere(2.0, 1), Side::Fixture),
    ]);
    let bytes = obj(&shell);
    let options = tobj::LoadOptions::default();
    let (models, materials) = tobj::load_obj_buf(&mut bytes.as_slice(), &options, |name| {
        assert_eq!(name.to_str(), Some("02-tau-0.410.mtl"));
        let mut mtl = Vec::new();
        write_mtl(&SideColours::default(), &mut mtl).unwrap();
        tobj::load_mtl_buf(&mut mtl.as_slice())
    })
    .unwrap();
    let seen: Vec<_> = models.iter().map(|m| (m.name.as_str(), m.mesh.indices.len() / 3)).collect();
    assert_eq!(seen, [("side-a", 1280), ("side-b", 320), ("fixture", 80)]);
    for (model, radius) in models.iter().zip([20.0, 8.0, 2.0]) {
        assert_eq!(materials.as_ref().unwrap()[model.mesh.material_id.unwrap()].name, model.name);
        for p in model.mesh.positions.chunks_exact(3) {
            let r = p.iter().map(|c| f64::from(*c).powi(2)).sum::<f64>().sqrt();
            assert!((r - radius).abs() < 3e-6, "{r}");
        }
    }
}

#[test]
fn more_triangles_than_a_chunk_keep_their_vertices() {
    let mesh = icosphere(30.0, 6); // 81920 triangles, five chunks
    let bytes = obj(&mesh);
    let (models, _) =
        tobj::load_obj_buf(&mut bytes.as_slice(), &tobj::LoadOptions::default(), |_| Ok(Default::default()))
            .unwrap();
    assert_eq!(models.len(), 1);
    let back = &models[0].mesh;
    for (t, face) in back.indices.chunks_exact(3).enumerate() {
        for (i, p) in face.iter().zip(mesh.corners(t)) {
            let q = &back.positions[3 * *i as usize..][..3];
            assert!((0..3).all(|k| (f64::from(q[k]) - p[k]).abs() < 3e-6), "triangle {t}");
        }
    }
}

#[test]
fn any_title_stays_text() {
    let title = "<script>alert(\"x\")</script> & 'quotes' \u{0} \u{1b}[31m ../.. 裏返し\u{ffff}\nline";
    let bytes = three_mf(&corner(), title);
    let text = part(&bytes, "3D/3dmodel.model");
    assert!(!text.contains("<script>") && !text.contains('\u{0}') && !text.contains('\u{1b}'));
    let kept = title.replace(['\u{0}', '\u{1b}', '\u{ffff}'], "\u{fffd}");
    // An independent path back: the XML parser's own unescaping.
    let start = text.find("name=\"Title\">").unwrap() + "name=\"Title\">".len();
    let raw = &text[start..start + text[start..].find("</metadata>").unwrap()];
    assert_eq!(quick_xml::escape::unescape(raw).unwrap(), kept);
    let mut bytes = Vec::new();
    let info = ObjInfo { object: title.into(), material_file: None, comments: vec![title.into()] };
    write_obj(&corner(), &info, &mut bytes).unwrap();
    let text = String::from_utf8(bytes).unwrap();
    assert!(text.lines().all(|l| ["# ", "o ", "v ", "g ", "f "].iter().any(|p| l.starts_with(p))), "{text}");
    assert!(!text.contains("usemtl") && !text.contains("mtllib"));
}

#[test]
fn a_placement_is_written_column_by_column() {
    let mesh = corner();
    let placement = Some([[0.0, -1.0, 0.0, 10.0], [1.0, 0.0, 0.0, 20.0], [0.0, 0.0, 1.0, 30.0]]);
    let object = ThreeMfObject { name: "", part_number: "", mesh: &mesh, placement };
    let write = |object| {
        let model = ThreeMf { title: "", metadata: &[], objects: &[object], colours: SideColours::default() };
        let mut bytes = Cursor::new(Vec::new());
        write_3mf(&model, &mut bytes).map(|()| bytes.into_inner())
    };
    let text = part(&write(object).unwrap(), "3D/3dmodel.model");
    assert!(text.contains(r#"transform="0 1 0 -1 0 0 0 0 1 10 20 30""#));
    for bad in [
        [[1.0, 0.0, 0.0, 0.0], [0.0, 1.0, 0.0, 0.0], [0.0, 0.0, -1.0, 0.0]],
        [[1.0, 0.0, 0.0, 0.0], [0.0, 1.0, 0.0, 0.0], [0.0, 0.0, 0.0, 0.0]],
        [[1.0, 0.0, 0.0, f64::NAN], [0.0, 1.0, 0.0, 0.0], [0.0, 0.0, 1.0, 0.0]],
    ] {
        let refused = write(ThreeMfObject { placement: Some(bad), ..object });
        assert!(matches!(refused, Err(WriteError::Placement { .. })), "{bad:?}");
    }
}

#[test]
fn metadata_that_is_no_name_or_comes_twice_is_refused() {
    let mesh = corner();
    let object = ThreeMfObject { name: "", part_number: "", mesh: &mesh, placement: None };
    for names in [vec!["Title"], vec!["tau", "tau"], vec![""], vec!["a b"], vec!["1a"], vec!["a\"b"]] {
        let metadata: Vec<_> = names.iter().map(|n| ((*n).to_owned(), String::new())).collect();
        let model =
            ThreeMf { title: "", metadata: &metadata, objects: &[object], colours: SideColours::default() };
        let refused = write_3mf(&model, Cursor::new(Vec::new()));
        assert!(matches!(refused, Err(WriteError::MetadataName { .. })), "{names:?}");
    }
    let none = ThreeMf { title: "", metadata: &[], objects: &[], colours: SideColours::default() };
    assert!(matches!(write_3mf(&none, Cursor::new(Vec::new())), Err(WriteError::NoObject)));
}

/// A disk that is full after some bytes.
struct FullAfter {
    room: usize,
    file: Cursor<Vec<u8>>,
}

impl Write for FullAfter {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        if self.room == 0 {
            return Err(io::Error::from(io::ErrorKind::StorageFull));
        }
        let n = bytes.len().min(self.room);
        self.room -= n;
        self.file.write(&bytes[..n])
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl Seek for FullAfter {
    fn seek(&mut self, to: SeekFrom) -> io::Result<u64> {
        self.file.seek(to)
    }
}

#[test]
fn a_full_disk_is_an_error_wherever_it_happens() {
    let mesh: TriMesh = icosphere(20.0, 3);
    let object = ThreeMfObject { name: "", part_number: "", mesh: &mesh, placement: None };
    let model = ThreeMf { title: "", metadata: &[], objects: &[object], colours: SideColours::default() };
    let full = |room| FullAfter { room, file: Cursor::new(Vec::new()) };
    let is_full = |r: Result<(), WriteError>| match r {
        Err(WriteError::Stream { source, .. }) => source.kind() == io::ErrorKind::StorageFull,
        _ => false,
    };
    let size = three_mf(&mesh, "").len() - 400;
    for room in [0, 1, 30, 100, 400, 700, 1000, size / 2, size] {
        assert!(is_full(write_3mf(&model, full(room))), "3MF, {room} bytes");
        assert!(is_full(write_stl(&mesh, full(room))), "STL, {room} bytes");
        assert!(is_full(write_obj(&mesh, &ObjInfo::default(), full(room))), "OBJ, {room} bytes");
    }
    assert!(is_full(write_mtl(&SideColours::default(), full(20))));
}
