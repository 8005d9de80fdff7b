//! A plot as a PNG picture: the [SVG](super::plot_svg), rasterised with a font of our own, so that it is the same on every
//! machine.

use std::sync::Arc;

use resvg::{tiny_skia, usvg};

use super::plot::Plot;
use super::plot_svg;

/// The letters, digits and signs of chemistry that plots use; its licence lies beside it.
const FONT: &[u8] = include_bytes!("../../fonts/DejaVuSans-subset.ttf");
const FAMILY: &str = "DejaVu Sans";
/// Pixels along a unit of the drawing: sharp in print at a column's width.
const SCALE: f32 = 2.0;

/// Why there is no picture; neither happens to a drawing of ours.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("the drawing cannot be turned into a picture: {0}")]
pub struct PngError(String);

/// The file's bytes: on white, at twice the size of the drawing.
///
/// # Errors
///
/// [`PngError`] when the drawing is beyond what a picture can hold.
pub fn bytes(plot: &Plot) -> Result<Vec<u8>, PngError> {
    let failed = |reason: &dyn std::fmt::Display| PngError(reason.to_string());
    let mut fonts = usvg::fontdb::Database::new();
    fonts.load_font_data(FONT.to_vec());
    fonts.set_sans_serif_family(FAMILY);
    let options =
        usvg::Options { font_family: FAMILY.to_owned(), fontdb: Arc::new(fonts), ..usvg::Options::default() };
    let tree = usvg::Tree::from_str(&plot_svg::fragment(plot), &options).map_err(|error| failed(&error))?;
    let size = tree.size().to_int_size().scale_by(SCALE).ok_or_else(|| failed(&"it has no size"))?;
    let mut picture =
        tiny_skia::Pixmap::new(size.width(), size.height()).ok_or_else(|| failed(&"it is too large"))?;
    resvg::render(&tree, tiny_skia::Transform::from_scale(SCALE, SCALE), &mut picture.as_mut());
    picture.encode_png().map_err(|error| failed(&error))
}

#[cfg(test)]
mod tests {
    use super::super::{Column, Table, plot::Options};
    use super::*;

    fn plot(label: &str) -> Plot {
        let table =
            Table::new([Column::numbers("pH", [4.0, 7.0, 10.0]), Column::numbers(label, [0.1, 2.0, 1.0])])
                .unwrap();
        Plot::of_table(&table, "pH", &[label], &Options::default()).unwrap()
    }

    #[test]
    fn a_picture_is_drawn_on_white_with_ink_for_its_words() {
        let decoded = |plot: &Plot| tiny_skia::Pixmap::decode_png(&bytes(plot).unwrap()).expect("a picture");
        let picture = decoded(&plot("m(HCO3^-) [mmol/kg]"));
        assert_eq!(picture.width(), 1440);
        assert!(picture.pixels().iter().all(|pixel| pixel.is_opaque()));
        let corner = picture.pixel(0, 0).unwrap();
        assert_eq!([corner.red(), corner.green(), corner.blue()], [255; 3]);
        // The superscripts are in the font: another charge is another picture.
        assert_ne!(picture.data(), decoded(&plot("m(HCO3^+) [mmol/kg]")).data());
    }
}
