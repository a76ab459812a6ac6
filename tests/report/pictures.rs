//! Pictures: what they show, measured in pixels against what can be computed by hand.

use stagewright::geom::Vec3;
use stagewright::mesh::{Side, TriMesh, shapes};
use stagewright::report::picture::{
    Frame, LONGEST_PX, Look, PictureError, Section, View, render, stage_pictures,
};

/// The pixels of a PNG, by the reader of the PNG library.
fn pixels(bytes: &[u8]) -> (u32, u32, Vec<[u8; 3]>) {
    let mut decoder = png::Decoder::new(std::io::Cursor::new(bytes));
    decoder.set_transformations(png::Transformations::EXPAND);
    let mut reader = decoder.read_info().unwrap();
    let mut buffer = vec![0; reader.output_buffer_size().unwrap()];
    let info = reader.next_frame(&mut buffer).unwrap();
    assert_eq!(info.color_type, png::ColorType::Rgb);
    buffer.truncate(info.buffer_size());
    (info.width, info.height, buffer.chunks_exact(3).map(|c| [c[0], c[1], c[2]]).collect())
}

/// A spherical shell, 40 mm outside in side A, 30 mm inside in side B.
fn shell() -> TriMesh {
    let mut mesh = shapes::sphere_shell(40.0, 30.0, 5);
    let outside = mesh.triangles.iter().map(|t| mesh.positions[t[0] as usize].norm() > 35.0);
    mesh.sides = outside.map(|o| if o { Side::A } else { Side::B }).collect();
    mesh
}

fn view(section: Option<Section>) -> View {
    View {
        direction: -Vec3::y(),
        up: Vec3::z(),
        frame: Frame::Fixed { centre: Vec3::zeros(), width_mm: 100.0 },
        size_px: [200, 200],
        section,
        supersample: 2,
        ground: false,
    }
}

fn front_half() -> Section {
    Section { point: Vec3::zeros(), normal: -Vec3::y() }
}

fn is_teal([r, g, b]: [u8; 3]) -> bool {
    r < g && r < b && b - r > 20 && g.abs_diff(b) < 12
}

fn is_sand([r, g, b]: [u8; 3]) -> bool {
    r > g && g > b && r - b > 25
}

fn is_grey([r, g, b]: [u8; 3]) -> bool {
    r.abs_diff(g) < 16 && g.abs_diff(b) < 16
}

fn share(pixels: &[[u8; 3]], what: impl Fn([u8; 3]) -> bool) -> f64 {
    pixels.iter().filter(|p| what(**p)).count() as f64 / pixels.len() as f64
}

#[test]
fn a_sphere_covers_the_area_of_its_circle_in_the_colour_of_its_outside() {
    let (width, height, seen) = pixels(&render(&shell(), &view(None), &Look::default()).unwrap());
    assert_eq!((width, height), (200, 200));
    // A disc of radius 40 mm in a square of 100 mm: 0.50265 of the picture.
    let disc = std::f64::consts::PI * 0.16;
    let covered = share(&seen, |p| p != [255; 3]);
    // The outline adds less than a pixel around the circle: 2 pi 80 of 40,000 pixels.
    assert!(covered > disc - 0.002 && covered < disc + 0.0126, "{covered} is covered, {disc} wanted");
    assert!(share(&seen, is_teal) > disc - 0.02);
    assert!(share(&seen, is_sand) < 1e-4);
}

#[test]
fn a_section_shows_the_cut_wall_and_the_inside() {
    let (_, _, seen) = pixels(&render(&shell(), &view(Some(front_half())), &Look::default()).unwrap());
    // The ring between 30 and 40 mm and the disc within, as shares of the picture.
    let ring = std::f64::consts::PI * 0.07;
    let inner = std::f64::consts::PI * 0.09;
    let cut = share(&seen, |p| is_grey(p) && p[0] < 150);
    assert!((cut - ring).abs() < 0.02, "{cut} of the picture is cut material, {ring} wanted");
    let inside = share(&seen, is_sand);
    assert!((inside - inner).abs() < 0.02, "{inside} of the picture is side B, {inner} wanted");
    assert!(share(&seen, is_teal) < 0.01);
}

#[test]
fn a_plane_beside_the_solid_cuts_nothing() {
    let far = Section { point: Vec3::new(0.0, -90.0, 0.0), normal: -Vec3::y() };
    let mesh = shell();
    let cut = render(&mesh, &view(Some(far)), &Look::default()).unwrap();
    assert!(share(&pixels(&cut).2, is_teal) > 0.48);
}

#[test]
fn a_fixture_is_grey_and_own_colours_are_used() {
    let block = shapes::cuboid(Vec3::repeat(-30.0), Vec3::repeat(30.0));
    let grey = pixels(&render(&block, &view(None), &Look::default()).unwrap()).2;
    assert!(share(&grey, |p| is_grey(p) && p != [255; 3]) > 0.35);
    let red = Look::of_sides([200, 20, 20], [20, 200, 20]);
    let painted = shapes::on_side(&block, Side::A);
    let seen = pixels(&render(&painted, &view(None), &red).unwrap()).2;
    assert!(share(&seen, |[r, g, b]| r / 3 > g.max(b)) > 0.34);
}

#[test]
fn threads_change_no_byte() {
    let mesh = shell();
    let mut ground = view(Some(front_half()));
    ground.ground = true;
    ground.direction = Vec3::new(0.4, -0.8, 0.4);
    let with = |threads: usize| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| render(&mesh, &ground, &Look::default()).unwrap())
    };
    let one = with(1);
    assert_eq!(one, with(2));
    assert_eq!(one, with(5));
}

#[test]
fn odd_input_gives_a_picture_or_a_clear_error() {
    let empty = TriMesh::default();
    let (_, _, seen) = pixels(&render(&empty, &view(Some(front_half())), &Look::default()).unwrap());
    assert!(seen.iter().all(|p| *p == [255; 3]));

    let mut broken = shell();
    broken.positions[0] = Vec3::new(f64::NAN, 0.0, 0.0);
    broken.positions[1] = Vec3::repeat(f64::INFINITY);
    render(&broken, &View { frame: Frame::Fit, ..view(None) }, &Look::default()).unwrap();
    stage_pictures(&TriMesh::default(), f64::NAN, &Look::default()).unwrap();

    let mut lost = view(None);
    lost.direction = Vec3::zeros();
    lost.up = Vec3::zeros();
    lost.supersample = 0;
    render(&shell(), &lost, &Look::default()).unwrap();

    for size_px in [[0, 10], [10, LONGEST_PX + 1]] {
        let refused = render(&shell(), &View { size_px, ..view(None) }, &Look::default()).unwrap_err();
        assert!(matches!(refused, PictureError::Size(..)), "{refused}");
        assert!(refused.to_string().contains("8192 px"));
    }
}

#[test]
fn a_stage_has_its_six_views_at_one_scale() {
    let mut mesh = shell();
    for p in &mut mesh.positions {
        p.z += 40.0;
    }
    let pictures = stage_pictures(&mesh, 80.0, &Look::default()).unwrap();
    let names: Vec<&str> = pictures.all.iter().map(|p| p.name).collect();
    assert_eq!(names, ["portrait", "opened", "front", "side", "top", "section"]);
    for picture in &pictures.all {
        let (width, height, seen) = pixels(&picture.png);
        assert_eq!([width, height], picture.size_px);
        assert!(picture.png.len() < 120_000, "{} has {} bytes", picture.name, picture.png.len());
        // The solid is a disc of 40 mm in every view but the opened one.
        let disc = std::f64::consts::PI * (40.0 / pictures.width_mm).powi(2);
        let covered = share(&seen, |p| is_teal(p) || is_sand(p) || (is_grey(p) && p[0] < 110));
        let half_is_gone = picture.name == "opened" && covered > 0.7 * disc && covered < disc;
        assert!(
            half_is_gone || (covered - disc).abs() < 0.02,
            "{}: {covered} covered, {disc} wanted",
            picture.name
        );
        assert_eq!(seen[0], [255; 3]);
    }
    let opened = pixels(&pictures.all[1].png).2;
    assert!(share(&opened, is_sand) > 0.1, "the inside is seen");
}
