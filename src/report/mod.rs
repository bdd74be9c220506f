//! Figures, tables and pages, drawn from the dossier; nothing is computed while drawing.
//!
//! [`write`] puts the whole report of a study into a folder. [`Figure`] draws one overlay (of a
//! study, of bands alone, of a prediction alone) and gives it as SVG, PNG or PDF. The listings
//! ([`levels_table`], [`bands_table`], [`assignment_table`]) are for a terminal.

mod axes;
mod canvas;
mod dossier;
mod figure;
mod files;
mod legend;
mod lines;
mod listings;
mod markdown;
mod page;
mod panels;
mod place;
mod products;
mod prose;
mod render;
mod sheet;
mod sticks;
mod table;
mod words;

pub use canvas::TextBox;
pub use dossier::{
    AssignmentSummary, BandCurve, Direction, Dossier, FitSummary, GroupingOdds, Overlay,
    OverlayStick, PredictedCurve, SCHEMA, TraceSummary,
};
pub use figure::{Figure, Heading};
pub use files::{put_in_place, write, write_figure};
pub use listings::{assignment_table, bands_table, levels_table};
pub use markdown::assignment_md;
pub use page::page_html;
pub use products::{trace_summary, write_bands, write_prediction};
pub use sheet::assignment_csv;

use std::path::PathBuf;

/// What can go wrong while a report is made.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum ReportError {
    /// The data do not fit together; a bug in whatever filled them.
    #[error("{place}: {problem}")]
    Inconsistent {
        /// Path of the field.
        place: String,
        /// What is wrong there.
        problem: String,
    },
    /// Nothing to draw: no measured point and no predicted curve.
    #[error("the figure would be empty: it has neither measured points nor a prediction")]
    Empty,
    /// A drawing could not be turned into a file format.
    #[error("the figure could not be made as {format}: {reason}")]
    Drawing {
        /// SVG, PNG or PDF.
        format: &'static str,
        /// What the converter said.
        reason: String,
    },
    /// The dossier could not be written as JSON, or the table as CSV.
    #[error("{name} could not be made: {reason}")]
    Encoding {
        /// Name of the output.
        name: &'static str,
        /// What the encoder said.
        reason: String,
    },
    /// A file or folder could not be written.
    #[error("cannot write {}: {source}", path.display())]
    Write {
        /// The file or folder.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
}
