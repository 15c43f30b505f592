//! From a vector picture to pixels.

use crate::failure::Failure;
use resvg::tiny_skia::{Pixmap, Transform};
use resvg::usvg::{Options, Tree};

/// Letters of labels: Latin, Greek and mathematical signs of DejaVu Sans, so that pictures look alike on machines
/// without fonts.
const FONT: &[u8] = include_bytes!("../../../assets/labels.ttf");
/// Pixels per unit of the vector picture.
const PIXELS: f32 = 2.5;

/// An SVG picture as PNG.
///
/// # Errors
/// [`Failure::Files`] for a picture too large to be drawn.
pub fn to_png(svg: &str) -> Result<Vec<u8>, Failure> {
    let refuse = |why: String| Failure::Files(format!("the diagram cannot be drawn: {why}"));
    let mut options = Options::default();
    options.fontdb_mut().load_font_data(FONT.to_vec());
    let tree = Tree::from_str(svg, &options).map_err(|error| refuse(error.to_string()))?;
    let size = tree.size();
    let (width, height) = ((PIXELS * size.width()).round() as u32, (PIXELS * size.height()).round() as u32);
    let mut pixels = Pixmap::new(width, height).ok_or_else(|| refuse(format!("{width} x {height} pixels")))?;
    resvg::render(&tree, Transform::from_scale(PIXELS, PIXELS), &mut pixels.as_mut());
    pixels.encode_png().map_err(|error| refuse(error.to_string()))
}
