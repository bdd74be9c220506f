//! Writes a commented study file for a molecule and a trace.

use super::settings::SCALE_OFFSET_SD_EV;
use crate::molecule::Molecule;
use crate::trace::{Axis, Trace};
use std::path::{Component, Path, PathBuf};

/// Words for the kinds of axis.
const AXES: &str = "ionization, kinetic, wavenumber, flight-time";

/// The text of a study file. `geometry` and `file` are written as given.
pub fn study_text(geometry: &Path, molecule: &Molecule, file: &Path, trace: &Trace) -> String {
    let quoted = |path: &Path| toml::Value::from(path.to_string_lossy().into_owned()).to_string();
    let [low, high] = trace.span_ev();
    let photon = match trace.photon_energy_ev {
        Some(energy) => format!("photon_energy_ev = {energy}"),
        None => "# photon_energy_ev = 21.218         # He I α; needed to look for lamp satellites"
            .to_owned(),
    };
    let axis = match trace.axis {
        Axis::Ionization | Axis::Kinetic | Axis::Wavenumber => {
            format!(
                "axis = {:?}                 # the others: {AXES}",
                trace.axis.name()
            )
        }
        Axis::FlightTime {
            length_m,
            time_zero_ns,
            retarding_v,
        } => format!(
            "axis = \"flight-time\"\nflight_length_m = {length_m}\ntime_zero_ns = {time_zero_ns}\nretarding_v = {retarding_v}"
        ),
    };
    format!(
        "\
# A study for `bandproof assign`. Lines that begin with # are notes or options left at their
# defaults; paths are relative to this file.
name = {name}

[molecule]
geometry = {geometry}
charge = {charge}
multiplicity = {multiplicity}

[trace]
file = {file}
{axis}
{photon}
# energy_column = 1                   # a header word or a number from 1
# counts_column = 2
# sd_column = \"sd\"                    # without one, counts are taken as Poisson
# window_ev = [{low:.2}, {high:.2}]           # part of the trace to use
# merge_ev = 0.005                    # merge channels narrower than this
# scale_offset_sd_ev = {SCALE_OFFSET_SD_EV}           # how well the energy scale's zero is known

[level]
# level = \"koopmans/def2-tzvp\"        # METHOD/BASIS
# auxiliary = \"def2-universal-jkfit\"
# all_electrons = true                # correlate the core too (methods beyond koopmans)

[fit]
# resolution_ev = 0.025               # instrument's FWHM; estimated if absent
# max_lines = 60

[output]
# folder = \"results\"                  # default: this file's name with .assigned
# direction = \"falling\"               # energy axis from high to low, as in older figures
",
        name = toml::Value::from(molecule.name.clone()),
        geometry = quoted(geometry),
        charge = molecule.charge,
        multiplicity = molecule.multiplicity,
        file = quoted(file),
    )
}

/// `path` as seen from `folder`, both relative to here or both absolute. Where no relative form
/// exists, the absolute one.
pub fn relative_to(path: &Path, folder: &Path) -> PathBuf {
    if folder.as_os_str().is_empty() || path.is_absolute() {
        return path.to_owned();
    }
    let plain = |p: &Path| p.components().all(|c| matches!(c, Component::Normal(_)));
    if !plain(folder) || !plain(path) {
        return std::path::absolute(path).unwrap_or_else(|_| path.to_owned());
    }
    match path.strip_prefix(folder) {
        Ok(inside) => inside.to_owned(),
        Err(_) => {
            let up: PathBuf = folder.components().map(|_| "..").collect();
            up.join(path)
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn paths_are_seen_from_the_study() {
        let seen = |path: &str, folder: &str| relative_to(Path::new(path), Path::new(folder));
        assert_eq!(seen("a/m.xyz", ""), Path::new("a/m.xyz"));
        assert_eq!(seen("a/m.xyz", "a"), Path::new("m.xyz"));
        assert_eq!(seen("m.xyz", "a/b"), Path::new("../../m.xyz"));
        assert!(seen("../m.xyz", "a").is_absolute());
    }
}
