//! Puts outputs in place: all of them, or none.

use super::{Dossier, Figure, ReportError, assignment_csv, assignment_md, page_html};
use std::fs;
use std::io::{self, Write as _};
use std::path::{Path, PathBuf};
use tempfile::NamedTempFile;

/// Writes the report of a study into a folder, which is made if need be: `dossier.json`,
/// `assignment.csv`, `assignment.md`, `overlay.svg`, `overlay.png`, `overlay.pdf`, `page.html`.
/// Returns their paths in this order.
///
/// Every file is rendered in memory, then written beside its place under another name, before the
/// first one is put in place: on any error the folder is as it was.
///
/// # Errors
/// Any [`ReportError`].
pub fn write(dossier: &Dossier, folder: &Path) -> Result<Vec<PathBuf>, ReportError> {
    dossier.check()?;
    let json = dossier_json(dossier)?;
    let figure = Figure::of(dossier)?;
    let outputs = vec![
        ("dossier.json", json.into_bytes()),
        ("assignment.csv", assignment_csv(dossier)?.into_bytes()),
        ("assignment.md", assignment_md(dossier).into_bytes()),
        ("overlay.svg", figure.svg().as_bytes().to_vec()),
        ("overlay.png", figure.png()?),
        ("overlay.pdf", figure.pdf()?),
        ("page.html", page_html(dossier, &figure).into_bytes()),
    ];
    write_files(folder, outputs)
}

/// Puts finished outputs into a folder, which is made if need be: all of them or none.
pub(super) fn write_files(
    folder: &Path,
    outputs: Vec<(&str, Vec<u8>)>,
) -> Result<Vec<PathBuf>, ReportError> {
    let made = make_folder(folder)?;
    let files: Vec<(PathBuf, Vec<u8>)> = (outputs.into_iter())
        .map(|(name, bytes)| (folder.join(name), bytes))
        .collect();
    put_all(folder, &files).inspect_err(|_| {
        // Only what this call made, deepest first; a folder that others filled meanwhile stays.
        for folder in &made {
            let _ = fs::remove_dir(folder);
        }
    })?;
    Ok(files.into_iter().map(|(path, _)| path).collect())
}

/// Writes one file, which appears complete or not at all.
///
/// # Errors
/// [`ReportError::Write`].
pub fn put_in_place(path: &Path, bytes: &[u8]) -> Result<(), ReportError> {
    put_all(folder_of(path), &[(path.to_owned(), bytes.to_vec())])
}

fn folder_of(path: &Path) -> &Path {
    match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    }
}

/// The dossier as JSON that can be read back.
fn dossier_json(dossier: &Dossier) -> Result<String, ReportError> {
    let failed = |e: serde_json::Error| ReportError::Encoding {
        name: "dossier.json",
        reason: e.to_string(),
    };
    let json = serde_json::to_string_pretty(dossier).map_err(failed)?;
    // JSON has no infinities and turns them into null, which no reader takes for a number.
    serde_json::from_str::<Dossier>(&json).map_err(failed)?;
    Ok(json + "\n")
}

/// Writes a figure as SVG, PNG or PDF, by the ending of the file's name.
///
/// # Errors
/// [`ReportError::Drawing`] for another ending; any other [`ReportError`].
pub fn write_figure(figure: &Figure, path: &Path) -> Result<(), ReportError> {
    let ending = path.extension().and_then(|e| e.to_str()).unwrap_or("");
    let bytes = match ending.to_ascii_lowercase().as_str() {
        "svg" => figure.svg().as_bytes().to_vec(),
        "png" => figure.png()?,
        "pdf" => figure.pdf()?,
        _ => {
            return Err(ReportError::Drawing {
                format: "file",
                reason: format!("'{}' should end in .svg, .png or .pdf", path.display()),
            });
        }
    };
    put_in_place(path, &bytes)
}

/// Makes a folder and those above it; returns the ones that were missing, deepest first.
fn make_folder(folder: &Path) -> Result<Vec<PathBuf>, ReportError> {
    let missing = folder
        .ancestors()
        .take_while(|a| !a.as_os_str().is_empty() && !a.exists())
        .map(Path::to_owned)
        .collect();
    fs::create_dir_all(folder).map_err(|e| failed(folder, e))?;
    Ok(missing)
}

fn failed(path: &Path, source: io::Error) -> ReportError {
    ReportError::Write {
        path: path.to_owned(),
        source,
    }
}

fn put_all(folder: &Path, files: &[(PathBuf, Vec<u8>)]) -> Result<(), ReportError> {
    let mut ready = Vec::new();
    for (path, bytes) in files {
        if path.is_dir() {
            let reason = io::Error::new(io::ErrorKind::IsADirectory, "a folder has this name");
            return Err(failed(path, reason));
        }
        ready.push(beside(folder, bytes).map_err(|e| failed(path, e))?);
    }
    let mut replaced: Vec<(&Path, Option<Vec<u8>>)> = Vec::new();
    for (file, (path, _)) in ready.into_iter().zip(files) {
        let before = fs::read(path).ok();
        if let Err(error) = file.persist(path) {
            for (path, before) in replaced {
                let _ = match before {
                    Some(bytes) => fs::write(path, bytes),
                    None => fs::remove_file(path),
                };
            }
            return Err(failed(path, error.error));
        }
        replaced.push((path, before));
    }
    Ok(())
}

/// A complete file under a passing name in the folder; it goes away unless it is put in place.
fn beside(folder: &Path, bytes: &[u8]) -> io::Result<NamedTempFile> {
    let mut builder = tempfile::Builder::new();
    builder.prefix(".bandproof-");
    #[cfg(unix)]
    {
        // What the user's mask leaves of it, as for any other file.
        use std::os::unix::fs::PermissionsExt as _;
        builder.permissions(fs::Permissions::from_mode(0o666));
    }
    let mut file = builder.tempfile_in(folder)?;
    file.write_all(bytes)?;
    file.as_file().sync_all()?;
    Ok(file)
}
