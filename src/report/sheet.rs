//! `assignment.csv`: one row per band, full numbers.

use super::listings::{character, states_of};
use super::prose::remark_kind;
use super::{Dossier, ReportError};

const COLUMNS: [&str; 25] = [
    "band",
    "vertical_ev",
    "vertical_sd_ev",
    "maximum_ev",
    "origin_ev",
    "area_counts",
    "area_sd_counts",
    "fwhm_ev",
    "members",
    "spacing_ev",
    "hole_states",
    "computed_ev",
    "koopmans_ev",
    "pole_strength",
    "degeneracy",
    "residual_raw_ev",
    "residual_ev",
    "verdict",
    "character",
    "probability",
    "alternatives",
    "remark_kind",
    "remark_causes",
    "remark",
    "level",
];

/// The table as CSV (RFC 4180): a head, then one row per band. Several entries in one cell are
/// separated by `; `; a cell without a value is empty.
///
/// # Errors
/// [`ReportError::Encoding`], which means a bug.
pub fn assignment_csv(dossier: &Dossier) -> Result<String, ReportError> {
    let failed = |reason: String| ReportError::Encoding {
        name: "assignment.csv",
        reason,
    };
    let mut writer = csv::WriterBuilder::new()
        .terminator(csv::Terminator::CRLF)
        .from_writer(Vec::new());
    let written = |r: Result<(), csv::Error>| r.map_err(|e| failed(e.to_string()));
    written(writer.write_record(COLUMNS))?;
    for band in &dossier.bands {
        let found = dossier.match_of(band.id);
        let states = found.map_or(Vec::new(), |m| states_of(dossier, m));
        let list = |values: Vec<String>| values.join("; ");
        let each = |value: fn(&crate::levels::HoleState) -> String| {
            list(states.iter().map(|s| value(s)).collect())
        };
        let optional = |value: Option<f64>| value.map_or(String::new(), |v| v.to_string());
        let remarks: Vec<_> = dossier.remarks_of(band.id).collect();
        let alternatives = found.iter().flat_map(|m| &m.alternatives).map(|a| {
            let names = match a.hole_states.is_empty() {
                true => "none".to_owned(),
                false => a.hole_states.join(" + "),
            };
            format!("{names} {}", a.probability)
        });
        let causes = remarks.iter().flat_map(|r| &r.candidates);
        let causes = causes.map(|c| format!("{} {}", c.cause, c.probability));
        let characters = found.iter().flat_map(|m| &m.character);
        written(
            writer.write_record([
                band.id.to_string(),
                band.vertical_ev.to_string(),
                band.vertical_sd.to_string(),
                band.maximum_ev.to_string(),
                optional(band.origin_ev),
                band.area.to_string(),
                band.area_sd.to_string(),
                band.fwhm_ev.to_string(),
                band.members.len().to_string(),
                optional(band.spacing_ev),
                found.map_or(String::new(), |m| m.hole_states.join("; ")),
                each(|s| s.ionization_energy_ev.to_string()),
                each(|s| s.koopmans_ev.to_string()),
                each(|s| s.pole_strength.to_string()),
                each(|s| s.degeneracy.to_string()),
                optional(found.map(|m| m.residual_raw_ev)),
                optional(found.map(|m| m.residual_ev)),
                list(characters.clone().map(|c| c.verdict.to_string()).collect()),
                list(characters.map(character).collect()),
                optional(found.map(|m| m.probability)),
                list(alternatives.collect()),
                list(
                    remarks
                        .iter()
                        .map(|r| remark_kind(r.kind).to_owned())
                        .collect(),
                ),
                list(causes.collect()),
                list(remarks.iter().map(|r| r.text.clone()).collect()),
                dossier.levels.level.to_string(),
            ]),
        )?;
    }
    let bytes = writer.into_inner().map_err(|e| failed(e.to_string()))?;
    String::from_utf8(bytes).map_err(|e| failed(e.to_string()))
}
