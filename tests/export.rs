//! Mesh files: what the writers write, read back by code that shares nothing with them, and what the readers
//! make of good, odd and hostile files. The 3MF container is also read by the consortium's own library in
//! `tests/reference`.
#![allow(clippy::unwrap_used, reason = "test code: anything unexpected is a failure")]

#[path = "export/hostile.rs"]
mod hostile;
#[path = "export/read.rs"]
mod read;
#[path = "export/reference_set.rs"]
mod reference_set;
#[path = "export/write.rs"]
mod write;

use stagewright::export::{ObjInfo, SideColours, ThreeMf, ThreeMfObject, write_3mf, write_obj, write_stl};
use stagewright::geom::Vec3;
use stagewright::mesh::{Side, TriMesh};
use std::io::Cursor;

/// A corner cut off a cube, 6 mm along each axis, with all three sides.
fn corner() -> TriMesh {
    TriMesh {
        positions: vec![Vec3::zeros(), 6.0 * Vec3::x(), 6.0 * Vec3::y(), 6.0 * Vec3::z()],
        triangles: vec![[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]],
        sides: vec![Side::B, Side::A, Side::Fixture, Side::A],
    }
}

fn stl(mesh: &TriMesh) -> Vec<u8> {
    let mut bytes = Vec::new();
    write_stl(mesh, &mut bytes).unwrap();
    bytes
}

fn obj(mesh: &TriMesh) -> Vec<u8> {
    let info = ObjInfo {
        object: "stage 2".into(),
        material_file: Some("02-tau-0.410.mtl".into()),
        comments: vec!["Foyer shelf".into()],
    };
    let mut bytes = Vec::new();
    write_obj(mesh, &info, &mut bytes).unwrap();
    bytes
}

fn three_mf(mesh: &TriMesh, title: &str) -> Vec<u8> {
    let object = ThreeMfObject { name: title, part_number: "02", mesh, placement: None };
    let metadata = [("Description".to_owned(), title.to_owned()), ("tau".to_owned(), "0.410".to_owned())];
    let model = ThreeMf { title, metadata: &metadata, objects: &[object], colours: SideColours::default() };
    let mut bytes = Cursor::new(Vec::new());
    write_3mf(&model, &mut bytes).unwrap();
    bytes.into_inner()
}

/// The text of a part of a container, read by the `zip` crate.
fn part(bytes: &[u8], name: &str) -> String {
    let mut archive = zip::ZipArchive::new(Cursor::new(bytes)).unwrap();
    let mut text = String::new();
    std::io::Read::read_to_string(&mut archive.by_name(name).unwrap(), &mut text).unwrap();
    text
}

/// A container with these parts.
fn container(parts: &[(&str, &str)]) -> Vec<u8> {
    let mut zip = zip::ZipWriter::new(Cursor::new(Vec::new()));
    for (name, text) in parts {
        zip.start_file(*name, zip::write::SimpleFileOptions::default()).unwrap();
        std::io::Write::write_all(&mut zip, text.as_bytes()).unwrap();
    }
    zip.finish().unwrap().into_inner()
}
