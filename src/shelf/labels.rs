//! Labels of lots: a code that a scanner types into the weigh-out as a keyboard would.

use qrcode::{Color, EcLevel, QrCode};

use crate::error::Error;
use crate::id::MaterialLotId;

/// What the code of a lot reads: in capitals, which take fewer dots than small letters.
pub fn payload(lot: MaterialLotId) -> String {
    format!("LEAT:LOT:{lot}").to_uppercase()
}

/// Dots of white about a code, as scanners want them. Source: ISO/IEC 18004, 6.3.8.
const QUIET: usize = 4;

/// A QR code as one path.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Code {
    /// How many dots wide and high, the white about it included.
    pub side: usize,
    /// The dark dots, for the `d` of a path: runs of a row as rectangles.
    pub path: String,
}

/// The code of a lot. A quarter of it may be wet, torn or smeared (level Q).
pub fn code(lot: MaterialLotId) -> Result<Code, Error> {
    let code = QrCode::with_error_correction_level(payload(lot), EcLevel::Q)
        .map_err(|error| Error::internal("The code of a label could not be made", error))?;
    let width = code.width();
    let dots = code.to_colors();
    let mut path = String::new();
    for (y, row) in dots.chunks(width).enumerate() {
        let mut x = 0;
        for run in row.chunk_by(|a, b| a == b) {
            if run.first() == Some(&Color::Dark) {
                let (left, top, long) = (x + QUIET, y + QUIET, run.len());
                path.push_str(&format!("M{left} {top}h{long}v1h-{long}z"));
            }
            x += run.len();
        }
    }
    Ok(Code {
        side: width + 2 * QUIET,
        path,
    })
}
