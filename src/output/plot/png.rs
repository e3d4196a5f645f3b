//! SVG to PNG, with the fonts that come with the program.

use std::sync::{Arc, OnceLock};

use resvg::tiny_skia::{Pixmap, Transform};
use resvg::usvg::{Options, Tree, fontdb};

/// Pixels of the PNG for each of the SVG: sharp in print at 10 cm (some 500 dots an inch).
const SCALE: f32 = 2.0;

/// Noto Sans, cut to the letters that are used (SIL Open Font License 1.1, `NotoSans-OFL.txt`).
static FONTS: [&[u8]; 2] = [
    include_bytes!("NotoSans-Regular.ttf"),
    include_bytes!("NotoSans-Bold.ttf"),
];

/// The picture as PNG, two pixels for each of its own.
///
/// # Errors
/// An SVG text that cannot be drawn, in words.
pub fn png(svg: &str) -> Result<Vec<u8>, String> {
    static DATABASE: OnceLock<Arc<fontdb::Database>> = OnceLock::new();
    let fonts = DATABASE.get_or_init(|| {
        let mut database = fontdb::Database::new();
        for font in FONTS {
            database.load_font_data(font.to_vec());
        }
        database.set_sans_serif_family("Noto Sans");
        Arc::new(database)
    });
    let options = Options {
        fontdb: Arc::clone(fonts),
        font_family: "Noto Sans".into(),
        ..Options::default()
    };
    let tree = Tree::from_str(svg, &options).map_err(|e| e.to_string())?;
    let size = tree.size().to_int_size().scale_by(SCALE);
    let mut pixels = size
        .and_then(|size| Pixmap::new(size.width(), size.height()))
        .ok_or("the picture has no size")?;
    resvg::render(
        &tree,
        Transform::from_scale(SCALE, SCALE),
        &mut pixels.as_mut(),
    );
    pixels.encode_png().map_err(|e| e.to_string())
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn dark_pixels(text: &str) -> usize {
        let svg = format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"60\" height=\"40\" font-family=\"Noto Sans\">\
             <rect width=\"60\" height=\"40\" fill=\"#ffffff\"/><text x=\"5\" y=\"30\" font-size=\"24\">{text}</text></svg>"
        );
        let picture = Pixmap::decode_png(&png(&svg).unwrap()).unwrap();
        picture.pixels().iter().filter(|p| p.red() < 128).count()
    }

    /// A character that the font does not have leaves nothing, and says nothing.
    #[test]
    fn every_sign_of_the_pictures_is_in_the_font() {
        assert_eq!(dark_pixels(" "), 0);
        for sign in "0–±²⁻⁵¹°ωζδé…,;:()%'+/ŁŻ".chars() {
            assert!(dark_pixels(&sign.to_string()) > 3, "{sign}");
        }
    }

    /// Text is dropped silently where no font is found, so dark pixels are counted.
    #[test]
    fn text_appears() {
        let svg = "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"200\" height=\"40\" font-family=\"Noto Sans\">\
                   <rect width=\"200\" height=\"40\" fill=\"#ffffff\"/><text x=\"5\" y=\"30\" font-size=\"24\">10⁻⁵ s⁻¹ ±ζδ–</text></svg>";
        let bytes = png(svg).unwrap();
        let picture = Pixmap::decode_png(&bytes).unwrap();
        assert_eq!((picture.width(), picture.height()), (400, 80));
        let dark = picture.pixels().iter().filter(|p| p.red() < 100).count();
        assert!(dark > 1000, "{dark}");
        assert!(png("<svg").is_err());
    }
}
