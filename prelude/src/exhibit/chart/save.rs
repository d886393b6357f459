//! Charts as files.

use std::path::Path;
use std::sync::{Arc, OnceLock};

use resvg::tiny_skia::{Pixmap, Transform};
use resvg::usvg::{Options, Tree, fontdb};

use crate::error::{Error, Result};

// Files have twice the chart's size, so that they stay sharp on dense screens and on paper.
const FILE_SCALE: f32 = 2.0;
const EXTENSIONS: &[&str] = &["svg", "png"];

/// Writes an SVG document to a file whose extension says how.
pub(super) fn save(svg: &str, path: &Path) -> Result<()> {
    let extension = path.extension().map(|extension| extension.to_ascii_lowercase());
    let bytes = match extension.as_deref().and_then(|extension| extension.to_str()) {
        Some("svg") => svg.as_bytes().to_vec(),
        Some("png") => png(svg, FILE_SCALE)
            .map_err(|reason| cannot_write(path, std::io::Error::other(reason)))?,
        _ => {
            return Err(Error::UnknownExtension { path: path.to_owned(), accepted: EXTENSIONS });
        }
    };
    std::fs::write(path, bytes).map_err(|source| cannot_write(path, source))
}

/// The chart as PNG at its own size.
pub(super) fn picture(svg: &str) -> std::result::Result<Vec<u8>, Failure> {
    png(svg, 1.0)
}

type Failure = Box<dyn std::error::Error + Send + Sync>;

fn png(svg: &str, scale: f32) -> std::result::Result<Vec<u8>, Failure> {
    let family = "DejaVu Sans".to_owned();
    let options = Options { fontdb: fonts(), font_family: family, ..Options::default() };
    let tree = Tree::from_str(svg, &options)?;
    let size = tree.size().to_int_size().scale_by(scale).ok_or("the chart has no size")?;
    let mut picture = Pixmap::new(size.width(), size.height()).ok_or("the picture has no size")?;
    resvg::render(&tree, Transform::from_scale(scale, scale), &mut picture.as_mut());
    Ok(picture.encode_png()?)
}

// Pictures must not depend on which fonts a machine has, so only the embedded ones are used.
fn fonts() -> Arc<fontdb::Database> {
    static FONTS: OnceLock<Arc<fontdb::Database>> = OnceLock::new();
    let load = || {
        let mut fonts = fontdb::Database::new();
        for data in [dejavu::sans::regular(), dejavu::sans::bold()] {
            fonts.load_font_source(fontdb::Source::Binary(Arc::new(data)));
        }
        fonts.set_sans_serif_family("DejaVu Sans");
        Arc::new(fonts)
    };
    FONTS.get_or_init(load).clone()
}

fn cannot_write(path: &Path, source: std::io::Error) -> Error {
    Error::Io { action: "write the chart", path: Some(path.to_owned()), source }
}
