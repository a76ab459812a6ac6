//! No bytes make a reader panic, hang or fill the memory.

use super::{container, corner, obj, part, stl, three_mf};
use proptest::prelude::*;
use stagewright::export::{MeshFormat, ReadError, detect_format, read_mesh};
use std::fmt::Write as _;

const FORMATS: [MeshFormat; 3] = [MeshFormat::Stl, MeshFormat::Obj, MeshFormat::ThreeMf];

/// Reads as every format; what comes back must keep the promises of a mesh.
fn read_all_ways(bytes: &[u8]) {
    let _ = detect_format(bytes, None);
    for format in FORMATS {
        match read_mesh(bytes, format) {
            Ok(back) => {
                let mesh = back.mesh;
                assert!(mesh.positions.iter().flatten().all(|c| c.abs() <= 1e6));
                assert!(mesh.triangles.iter().flatten().all(|&i| (i as usize) < mesh.positions.len()));
                assert_eq!(mesh.sides.len(), mesh.triangles.len());
                assert!(back.notes.iter().all(|n| !n.to_string().is_empty()));
            }
            Err(e) => assert!(!e.to_string().is_empty()),
        }
    }
}

/// A good file of each kind; the last two are a text STL and a bare model part.
fn seeds() -> Vec<Vec<u8>> {
    let mesh = corner();
    let model = three_mf(&mesh, "x");
    let text = "solid a\nfacet normal 0 0 1\nouter loop\nvertex 0 0 0\nvertex 1 0 0\nvertex 0 1 0\nendloop\nendfacet\nendsolid\n";
    let plain = part(&model, "3D/3dmodel.model").into_bytes();
    vec![stl(&mesh), obj(&mesh), model, text.as_bytes().to_vec(), plain]
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 1500, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn changed_and_cut_files(
        which in 0_usize..5,
        changes in prop::collection::vec((any::<prop::sample::Index>(), any::<u8>()), 0..12),
        cut in any::<prop::sample::Index>(),
        whole in any::<bool>(),
    ) {
        let mut bytes = seeds().swap_remove(which);
        for (at, byte) in changes {
            let at = at.index(bytes.len());
            bytes[at] = byte;
        }
        if !whole {
            bytes.truncate(cut.index(bytes.len()));
        }
        if which == 4 {
            // The changed XML inside a sound container: deflate and its checksum would hide it otherwise.
            bytes = container(&[("3D/3dmodel.model", &String::from_utf8_lossy(&bytes))]);
        }
        read_all_ways(&bytes);
    }

    #[test]
    fn any_bytes(bytes in prop::collection::vec(any::<u8>(), 0..400)) {
        read_all_ways(&bytes);
    }

    #[test]
    fn any_lines_of_known_words(words in prop::collection::vec(
        prop::sample::select(vec![
            "solid", "facet", "normal", "outer", "loop", "vertex", "endloop", "endfacet", "endsolid", "v", "f",
            "o", "0", "1", "-1", "3", "1/1", "-2//9", "1e999", "nan", "\\\n", "\n", "\r\n", "l", "#",
            "18446744073709551615", "-9223372036854775808", "/", "1/-99999999999999999999/2",
        ]), 0..60)) {
        read_all_ways(words.join(" ").as_bytes());
        read_all_ways(format!("solid {}", words.join(" ")).as_bytes());
    }
}

fn read_model(text: &str) -> Result<stagewright::export::Imported, ReadError> {
    read_mesh(&container(&[("3D/3dmodel.model", text)]), MeshFormat::ThreeMf)
}

#[test]
fn ten_megabytes_of_garbage() {
    let mut state = 1_u64;
    let bytes: Vec<u8> = (0..10_000_000)
        .map(|_| {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            state.to_be_bytes()[0]
        })
        .collect();
    for format in FORMATS {
        assert!(read_mesh(&bytes, format).is_err());
    }
}

#[test]
fn components_of_components_do_not_multiply_without_end() {
    // Each object holds the one before it twice: 2^40 tetrahedra.
    let mesh = "<mesh><vertices><vertex x=\"0\" y=\"0\" z=\"0\"/></vertices><triangles><triangle v1=\"0\" v2=\"0\" v3=\"0\"/></triangles></mesh>";
    for leaf in [mesh, ""] {
        let mut text = format!("<model><resources><object id=\"0\">{leaf}</object>");
        for id in 1..40 {
            let inner = id - 1;
            write!(text, "<object id=\"{id}\"><components><component objectid=\"{inner}\"/><component objectid=\"{inner}\"/></components></object>").unwrap();
        }
        text += "</resources><build><item objectid=\"39\"/></build></model>";
        let message = read_model(&text).unwrap_err().to_string();
        assert!(message.contains("used more than 1000000 times"), "{message}");
    }
}

#[test]
fn long_chains_and_deep_nesting_are_refused() {
    let mut text = "<model><resources><object id=\"0\"/>".to_owned();
    for id in 1..5000 {
        let inner = id - 1;
        write!(
            text,
            "<object id=\"{id}\"><components><component objectid=\"{inner}\"/></components></object>"
        )
        .unwrap();
    }
    text += "</resources><build><item objectid=\"4999\"/></build></model>";
    assert!(read_model(&text).unwrap_err().to_string().contains("nested deeper than 64"));
    let deep = format!("<model>{}", "<a>".repeat(100_000));
    assert!(read_model(&deep).unwrap_err().to_string().contains("nested deeper than 64"));
}

#[test]
fn a_tag_or_text_that_would_fill_the_memory_is_refused() {
    for text in [
        format!("<model><metadata>{}</metadata></model>", " ".repeat(3 << 20)),
        format!("<model a=\"{}\"/>", "x".repeat(3 << 20)),
        format!("<model><!-- {} --></model>", "x".repeat(3 << 20)),
    ] {
        let message = read_model(&text).unwrap_err().to_string();
        assert!(message.contains("a single tag or text is longer than 1048576 bytes"), "{message}");
    }
}

#[test]
fn a_container_that_unpacks_to_far_more_than_it_holds_is_refused() {
    // 5 GiB of short comments deflate to about 5 MB... too slow to make here; 64 MiB show that the stream is
    // followed without being kept, and the limit itself is tested in `bounded.rs`.
    let text = format!("<model><resources/><build/>{}</model>", "<!---->".repeat((64 << 20) / 7));
    let bytes = container(&[("3D/3dmodel.model", &text)]);
    assert!(bytes.len() < 1 << 20);
    assert!(matches!(read_mesh(&bytes, MeshFormat::ThreeMf), Err(ReadError::NoTriangles { .. })));
}
