//! What will run: every choice resolved, recorded in the dossier.

use super::StudyError;
use super::request::{
    AxisName, FitRequest, LevelName, LevelRequest, MoleculeRequest, StudyRequest, TraceRequest,
};
use crate::basis;
use crate::fit::FitOptions;
use crate::report::Direction;
use crate::trace::{Axis, ReadOptions};
use serde::Serialize;
use std::path::{Path, PathBuf};

/// Standard deviation of an energy scale's offset where the user states none, eV: a scale set on
/// a reference line is commonly good to this (common practice, no source).
pub const SCALE_OFFSET_SD_EV: f64 = 0.03;

/// Settings of `assign`.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Settings {
    /// Name of the study.
    pub name: String,
    /// What to compute.
    pub theory: TheorySettings,
    /// What was measured.
    pub trace: TraceSettings,
    /// How to fit.
    pub fit: FitOptions,
    /// Which way the energy axis of the figure runs.
    pub direction: Direction,
    /// Where to write; not recorded, since the outputs may be moved.
    #[serde(skip)]
    pub folder: PathBuf,
}

/// A molecule and a level.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct TheorySettings {
    /// Geometry as the user named it.
    pub geometry: PathBuf,
    /// Where it is found from here.
    #[serde(skip)]
    pub geometry_path: PathBuf,
    /// Total charge.
    pub charge: i32,
    /// Spin multiplicity; the lowest that fits if absent.
    pub multiplicity: Option<u32>,
    /// Method and basis.
    pub level: LevelName,
    /// Auxiliary set of the density fitting.
    pub auxiliary: String,
    /// Whether methods beyond Koopmans correlate the core electrons too.
    pub all_electrons: bool,
}

/// A measured file and how to read it.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct TraceSettings {
    /// The file as the user named it.
    pub file: PathBuf,
    /// Where it is found from here.
    #[serde(skip)]
    pub path: PathBuf,
    /// How to read it.
    pub read: ReadOptions,
    /// Neighbouring channels are merged until each is at least this wide, eV.
    pub merge_ev: Option<f64>,
    /// Standard deviation of the energy scale's offset, eV.
    pub scale_offset_sd_ev: f64,
}

impl Settings {
    /// Resolves a request that was read from `study`.
    ///
    /// # Errors
    /// [`StudyError::Missing`] for a key without which nothing can run.
    pub fn resolve(request: StudyRequest, study: &Path) -> Result<Self, StudyError> {
        let source_name = study.display().to_string();
        let base = study.parent().unwrap_or(Path::new("")).to_owned();
        let trace = TraceSettings::resolve(&request.trace, &base, &source_name)?;
        let theory =
            TheorySettings::resolve(&request.molecule, &request.level, &base, &source_name)?;
        let stem = study.file_stem().unwrap_or_default().to_string_lossy();
        let folder = match request.output.folder {
            Some(folder) => base.join(folder),
            None => base.join(format!("{stem}.assigned")),
        };
        Ok(Self {
            name: request.name.unwrap_or_else(|| stem.into_owned()),
            theory,
            trace,
            fit: request.fit.resolve(),
            direction: request.output.direction.unwrap_or_default(),
            folder,
        })
    }
}

impl FitRequest {
    /// The options that will be in force.
    pub fn resolve(&self) -> FitOptions {
        let mut options = FitOptions {
            resolution_ev: self.resolution_ev.map(Into::into),
            ..FitOptions::default()
        };
        if let Some(max_lines) = self.max_lines {
            options.max_lines = max_lines;
        }
        options
    }
}

impl TheorySettings {
    /// Resolves a molecule and a level; paths are relative to `base`.
    ///
    /// # Errors
    /// [`StudyError::Missing`] without a geometry.
    pub fn resolve(
        molecule: &MoleculeRequest,
        level: &LevelRequest,
        base: &Path,
        source_name: &str,
    ) -> Result<Self, StudyError> {
        let Some(geometry) = molecule.geometry.clone() else {
            return Err(StudyError::Missing {
                source_name: source_name.to_owned(),
                key: "molecule.geometry",
                expected: "the XYZ file of the molecule",
            });
        };
        let auxiliary = level.auxiliary.clone();
        let all_electrons = level.all_electrons.unwrap_or(false);
        let level = level.level.clone().unwrap_or_default();
        let auxiliary =
            auxiliary.unwrap_or_else(|| basis::default_auxiliary(&level.basis).to_owned());
        Ok(Self {
            geometry_path: base.join(&geometry),
            geometry,
            charge: molecule.charge.unwrap_or(0),
            multiplicity: molecule.multiplicity,
            level,
            auxiliary,
            all_electrons,
        })
    }
}

impl TraceSettings {
    /// Resolves a trace; paths are relative to `base`.
    ///
    /// # Errors
    /// [`StudyError::Missing`] without a file, or without the calibration of a flight time.
    pub fn resolve(
        request: &TraceRequest,
        base: &Path,
        source_name: &str,
    ) -> Result<Self, StudyError> {
        let missing = |key, expected| StudyError::Missing {
            source_name: source_name.to_owned(),
            key,
            expected,
        };
        let file =
            (request.file.clone()).ok_or_else(|| missing("trace.file", "the measured file"))?;
        let axis = match request.axis {
            None => None,
            Some(AxisName::Ionization) => Some(Axis::Ionization),
            Some(AxisName::Kinetic) => Some(Axis::Kinetic),
            Some(AxisName::Wavenumber) => Some(Axis::Wavenumber),
            Some(AxisName::FlightTime) => Some(Axis::FlightTime {
                length_m: (request.flight_length_m.map(Into::into)).ok_or_else(|| {
                    missing("trace.flight_length_m", "the flight length in metres")
                })?,
                time_zero_ns: (request.time_zero_ns)
                    .ok_or_else(|| missing("trace.time_zero_ns", "time zero in nanoseconds"))?,
                retarding_v: request.retarding_v.unwrap_or(0.0),
            }),
        };
        Ok(Self {
            path: base.join(&file),
            file,
            read: ReadOptions {
                trace: request.choice.clone(),
                axis,
                photon_energy_ev: request.photon_energy_ev.map(Into::into),
                energy_column: request.energy_column.clone(),
                counts_column: request.counts_column.clone(),
                sd_column: request.sd_column.clone(),
                window_ev: request.window_ev.map(Into::into),
                delimiter: request.delimiter,
                decimal: request.decimal,
            },
            merge_ev: request.merge_ev.map(Into::into),
            scale_offset_sd_ev: request
                .scale_offset_sd_ev
                .map_or(SCALE_OFFSET_SD_EV, Into::into),
        })
    }

    /// Reads the trace, merged as asked.
    ///
    /// # Errors
    /// What is wrong with the file.
    pub fn load(&self) -> Result<crate::trace::Trace, StudyError> {
        let trace = crate::trace::read(&self.path, &self.read)?;
        Ok(match self.merge_ev {
            Some(width) => trace.merged(width),
            None => trace,
        })
    }
}
