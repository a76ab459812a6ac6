//! Pictures inside the page: PNG as data URI, with the size and scale the PNG states.

/// What the first chunks of a PNG say.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct PngFacts {
    pub(super) width: u32,
    pub(super) height: u32,
    /// Width of what is shown, mm, from the resolution entry (pHYs).
    pub(super) width_mm: Option<f64>,
}

/// Reads the header and the resolution entry; `None` when the bytes are no PNG.
pub(super) fn png_facts(bytes: &[u8]) -> Option<PngFacts> {
    let mut rest = bytes.strip_prefix(b"\x89PNG\r\n\x1a\n")?;
    let mut size = None;
    let mut width_mm = None;
    loop {
        let (length, tail) = number(rest)?;
        let (kind, tail) = tail.split_at_checked(4)?;
        let (data, tail) = tail.split_at_checked(length as usize)?;
        match kind {
            b"IHDR" => {
                let (width, more) = number(data)?;
                size = Some((width, number(more)?.0));
            }
            b"pHYs" => {
                let (per_metre, _) = number(data)?;
                if data.get(8) == Some(&1) && per_metre > 0 {
                    width_mm = size.map(|(w, _)| f64::from(w) * 1000.0 / f64::from(per_metre));
                }
            }
            b"IDAT" | b"IEND" => break,
            _ => {}
        }
        rest = tail.get(4..)?;
    }
    size.map(|(width, height)| PngFacts { width, height, width_mm })
}

fn number(bytes: &[u8]) -> Option<(u32, &[u8])> {
    let (head, tail) = bytes.split_first_chunk::<4>()?;
    Some((u32::from_be_bytes(*head), tail))
}

/// The bytes as a `data:` URI.
pub(super) fn data_uri(png: &[u8]) -> String {
    let mut out = String::from("data:image/png;base64,");
    base64(png, &mut out);
    out
}

/// Base 64 with padding (RFC 4648, section 4).
fn base64(bytes: &[u8], out: &mut String) {
    const ALPHABET: &[u8; 64] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    out.reserve(bytes.len().div_ceil(3) * 4);
    for three in bytes.chunks(3) {
        let get = |k: usize| u32::from(three.get(k).copied().unwrap_or(0));
        let bits = get(0) << 16 | get(1) << 8 | get(2);
        for k in 0..4 {
            if k <= three.len() {
                out.push(char::from(ALPHABET[(bits >> (18 - 6 * k)) as usize & 63]));
            } else {
                out.push('=');
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn base64_gives_the_published_vectors() {
        // RFC 4648, section 10.
        for (plain, coded) in [
            ("", ""),
            ("f", "Zg=="),
            ("fo", "Zm8="),
            ("foo", "Zm9v"),
            ("foob", "Zm9vYg=="),
            ("fooba", "Zm9vYmE="),
            ("foobar", "Zm9vYmFy"),
        ] {
            let mut out = String::new();
            base64(plain.as_bytes(), &mut out);
            assert_eq!(out, coded);
        }
    }

    #[test]
    fn a_png_states_its_size_and_scale_and_other_bytes_state_nothing() {
        let mut bytes = Vec::new();
        let mut encoder = png::Encoder::new(&mut bytes, 30, 20);
        encoder.set_color(png::ColorType::Grayscale);
        encoder.set_pixel_dims(Some(png::PixelDimensions { xppu: 1000, yppu: 1000, unit: png::Unit::Meter }));
        encoder.write_header().unwrap().write_image_data(&[0; 600]).unwrap();
        assert_eq!(png_facts(&bytes), Some(PngFacts { width: 30, height: 20, width_mm: Some(30.0) }));
        assert_eq!(png_facts(b"GIF89a"), None);
        for cut in 0..40 {
            let _ = png_facts(&bytes[..cut]);
        }
        assert_eq!(png_facts(&bytes[..20]), None);
    }
}
