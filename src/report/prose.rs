//! Sentences that several outputs share.

use super::Dossier;
use super::words::{counted, energy, orbital, percent, signed};
use crate::assign::RemarkKind;
use crate::fit::{CorrelatedPair, FitStatistics};
use crate::levels::{HoleState, Levels, LineKind, Method};
use crate::trace::{Axis, Noise};

/// What the three energies of a band are.
pub const WORDS_OF_ENERGY: &str = "Vertical: the first moment of the band, which the \
Franck-Condon sum rule ties to the vertical ionization energy. Maximum: the highest point of the \
fitted band. Origin: the first resolved member; whether it is the 0-0 line, and so the adiabatic \
ionization energy, is not decided here. Uncertainties are one standard deviation of the fit; the \
energy scale's own comes on top.";

/// What a level is known to get wrong.
pub fn level_limits(method: Method) -> &'static str {
    match method {
        Method::Koopmans => {
            "Koopmans' values (I = −ε) leave out that the other electrons relax and that they \
             are correlated. Ionization energies come out too high as a rule, by about 1 eV and \
             sometimes by several, and neighbours that lie within about 1 eV of each other may \
             stand in the wrong order; dinitrogen is the known example. Satellites and the \
             break-up of inner-valence lines are not described at all."
        }
        Method::SecondOrder => {
            "The second-order self-energy takes relaxation and correlation to lowest order. Against \
             near-exact outer-valence energies in the same basis its values are wrong by 0.69 eV in \
             the mean and nearly always too low, most for lone pairs on N, O and F. It gives one line \
             per orbital; where the pole strength is below 0.85 that picture is doubtful, and \
             satellites are not described."
        }
        Method::P3 => {
            "P3 is meant for outer-valence states: against near-exact energies in the same basis its \
             mean absolute error is 0.23 eV, the largest 0.48 eV. It gives one line per orbital, and none where \
             the pole strength falls below 0.8; below 0.85 the line is doubtful. Satellites and the \
             break-up of inner-valence lines are not described."
        }
        Method::Adc2 => {
            "ADC(2) gives main lines and satellites together. Main lines of the outer valence are wrong \
             by 0.72 eV in the mean against near-exact energies in the same basis, and nearly always \
             too low. Satellites are described to lowest order only and may be off by 2 eV and more: \
             that strength is missing from a main line counts, where it went does not."
        }
        Method::Adc2x => {
            "ADC(2)-x gives main lines and satellites together. Main lines of the outer valence are \
             wrong by 0.73 eV in the mean against near-exact energies in the same basis, and nearly \
             always too low. Satellites are off by about 2 eV either way: that strength is missing from \
             a main line counts, where it went does not."
        }
        Method::Adc3 => {
            "ADC(3) gives main lines and satellites together. Main lines of the outer valence are wrong \
             by 0.28 eV in the mean against near-exact energies in the same basis; lone pairs on N, O \
             and F come out too high by up to 0.9 eV. Satellites are off by about 2 eV either way: that \
             strength is missing from a main line counts, where it went does not."
        }
    }
}

/// A main line with less than this pole strength is doubtful: below it, many-body methods and
/// experiment begin to disagree on what a line is (M. S. Deleuze, J. Phys. Chem. A 108, 9244, 2004,
/// for outer-valence Green's functions).
const DOUBTFUL_STRENGTH: f64 = 0.85;

/// Energies closer than this are not an order, eV.
const SAME_ENERGY_EV: f64 = 1e-6;

/// What to heed in computed levels: neighbours whose order is not that of the orbitals, weak main
/// lines, and what the method could not say.
pub fn level_notes(levels: &Levels) -> Vec<String> {
    let mains: Vec<&HoleState> = (levels.hole_states.iter())
        .filter(|s| s.kind == LineKind::Main)
        .collect();
    let name = |state: &HoleState| orbital(&state.label).unicode();
    let mut notes: Vec<String> = (mains.iter().zip(mains.iter().skip(1)))
        .filter(|(first, second)| first.koopmans_ev > second.koopmans_ev + SAME_ENERGY_EV)
        .map(|(first, second)| {
            format!(
                "Order changed: {} ({} eV) comes before {} ({} eV), Koopmans' rule has them the other \
                 way round ({} and {} eV).",
                name(first),
                energy(first.ionization_energy_ev),
                name(second),
                energy(second.ionization_energy_ev),
                energy(first.koopmans_ev),
                energy(second.koopmans_ev),
            )
        })
        .collect();
    notes.extend(
        (mains.iter())
            .filter(|state| state.pole_strength < DOUBTFUL_STRENGTH)
            .map(|state| {
                format!(
                    "Weak main line: {} at {} eV has a pole strength of {:.3}; below {DOUBTFUL_STRENGTH} \
                     the picture of one electron leaving one orbital is doubtful.",
                    name(state),
                    energy(state.ionization_energy_ev),
                    state.pole_strength,
                )
            }),
    );
    notes.extend(levels.notes.iter().cloned());
    notes
}

/// Name of a kind of remark.
pub fn remark_kind(kind: RemarkKind) -> &'static str {
    match kind {
        RemarkKind::ForeignGas => "foreign gas",
        RemarkKind::LampSatellite => "lamp satellite",
        RemarkKind::Unexplained => "unexplained",
        RemarkKind::MissingBand => "no band found",
        RemarkKind::OpenOrder => "order open",
        RemarkKind::Fit => "fit",
    }
}

/// χ², runs test, and what they mean.
pub fn fit_quality(s: &FitStatistics) -> String {
    let verdict = match (s.reduced_chi_squared, s.runs_probability) {
        (x, p) if x < 1.3 && p > 0.01 => "the fit leaves no structure that the noise would not",
        (x, _) if x >= 1.3 => "the fit leaves more than noise: shapes or bands are missing",
        _ => "the residuals' signs keep together: the shapes are not quite right",
    };
    format!(
        "Reduced χ² {:.2} ({:.1} over {} degrees of freedom); runs test: score {}, probability \
         {}; {verdict}.",
        s.reduced_chi_squared,
        s.chi_squared,
        s.degrees_of_freedom,
        signed(s.runs_score),
        percent(s.runs_probability),
    )
}

/// What the data do not determine.
pub fn fit_notes(undetermined: &[String], correlations: &[CorrelatedPair]) -> Vec<String> {
    let mut notes: Vec<String> = (undetermined.iter().take(LISTED_NOTES))
        .map(|name| format!("The data do not determine: {name}."))
        .collect();
    let mut strongest: Vec<&CorrelatedPair> = correlations.iter().collect();
    strongest.sort_by(|a, b| b.correlation.abs().total_cmp(&a.correlation.abs()));
    notes.extend(strongest.into_iter().take(LISTED_NOTES).map(|c| {
        let sign = if c.correlation < 0.0 { "−" } else { "+" };
        let size = c.correlation.abs();
        format!(
            "{} and {} can hardly be told apart (correlation {sign}{size:.2}).",
            c.first, c.second
        )
    }));
    let listed = undetermined.len().min(LISTED_NOTES) + correlations.len().min(LISTED_NOTES);
    let more = undetermined.len() + correlations.len() - listed;
    if more > 0 {
        notes.push(format!(
            "{more} more of these notes stand in the data file."
        ));
    }
    notes
}

/// How many undetermined parameters, and how many correlated pairs, are written out.
const LISTED_NOTES: usize = 5;

/// How computed energies were brought onto the measured ones.
pub fn shift(dossier: &Dossier) -> String {
    let a = &dossier.assignment;
    if dossier.matches.is_empty() {
        return "No computed state was matched, so the computed energies stand unshifted."
            .to_owned();
    }
    format!(
        "Computed energies were brought onto the measured ones by I = {:.3} × I(computed) {} {:.2} eV \
         (± {:.2} eV at the centre of the matched levels).",
        a.scale,
        if a.shift_ev < 0.0 { '−' } else { '+' },
        a.shift_ev.abs(),
        a.shift_sd_ev
    )
}

/// What was measured, in a sentence.
pub fn trace(dossier: &Dossier) -> String {
    let t = &dossier.trace;
    let photon = match t.photon_energy_ev {
        Some(energy) => format!(", photon energy {energy:.3} eV"),
        None => ", photon energy not stated".to_owned(),
    };
    let axis = match t.axis {
        Axis::Ionization => "recorded against ionization energy".to_owned(),
        Axis::Kinetic => "recorded against kinetic energy".to_owned(),
        Axis::Wavenumber => "recorded against wavenumber".to_owned(),
        Axis::FlightTime {
            length_m,
            time_zero_ns,
            retarding_v,
        } => format!(
            "recorded against flight time ({length_m} m, time zero {time_zero_ns} ns, retarding \
             potential {retarding_v} V)"
        ),
    };
    let noise = match t.noise {
        Noise::Poisson => "standard deviations are those of counting",
        Noise::Stated => "standard deviations are the file's own",
    };
    format!(
        "{}: {} from {:.2} to {:.2} eV{photon}; {axis}; {noise}.",
        t.source,
        counted(t.channels, "channel"),
        t.span_ev[0],
        t.span_ev[1]
    )
}

/// The outcome in one paragraph.
pub fn summary(dossier: &Dossier) -> String {
    let states: usize = dossier.matches.iter().map(|m| m.hole_states.len()).sum();
    let mut out = format!(
        "The trace shows {}; {} of them {} matched to {} of {} computed at {}.",
        counted(dossier.bands.len(), "band"),
        dossier.matches.len(),
        if dossier.matches.len() == 1 {
            "is"
        } else {
            "are"
        },
        counted(states, "hole state"),
        dossier.levels.molecule.formula,
        dossier.levels.level,
    );
    let doubtful: Vec<String> = dossier
        .matches
        .iter()
        .filter(|m| m.probability < 0.9)
        .map(|m| format!("band {} ({})", m.band, percent(m.probability)))
        .collect();
    if !doubtful.is_empty() {
        out.push_str(&format!(
            " Less than 90 % certain: {}.",
            doubtful.join(", ")
        ));
    } else if let Some(least) = dossier
        .matches
        .iter()
        .min_by(|a, b| a.probability.total_cmp(&b.probability))
    {
        out.push_str(&format!(
            " The least certain match, that of band {}, has a probability of {}.",
            least.band,
            percent(least.probability)
        ));
    }
    match dossier.remarks.len() {
        0 => {}
        1 => out.push_str(" There is one remark."),
        n => out.push_str(&format!(" There are {n} remarks.")),
    }
    out
}

/// How the lines were grouped into bands, where more than one way is open.
pub fn grouping(dossier: &Dossier) -> Option<String> {
    let groupings = &dossier.fit.groupings;
    (groupings.len() > 1).then(|| {
        format!(
            "The lines can be grouped into bands in {} ways; the one shown has a probability of \
             {} after matching.",
            groupings.len(),
            percent(dossier.assignment.grouping_probability)
        )
    })
}

/// The text with a capital at its head.
pub fn capital(text: &str) -> String {
    let mut chars = text.chars();
    match chars.next() {
        Some(first) => first.to_uppercase().chain(chars).collect(),
        None => String::new(),
    }
}
