//! What the names of columns, variables and units mean, in every format.

use super::record::Meaning;

/// What a name says it holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Role {
    Axis(Meaning),
    /// Names with "counts" come before other words for a signal.
    Counts {
        plain: bool,
    },
    Sd,
}

/// Lower-case words of a name: runs of letters and digits.
fn words(name: &str) -> Vec<String> {
    let lower = name.to_lowercase();
    lower
        .split(|c: char| !c.is_alphanumeric())
        .filter(|w| !w.is_empty())
        .map(String::from)
        .collect()
}

/// What a name says it stands for.
pub(super) fn role(name: &str) -> Option<Role> {
    let lower = name.to_lowercase();
    let words = words(name);
    let has = |part: &str| lower.contains(part);
    let is = |list: &[&str]| words.iter().any(|w| list.contains(&w.as_str()));
    if has("exposure") {
        return None;
    }
    let meaning = meaning(name);
    let energy = has("energ") || is(&["e", "ev"]);
    let plain = has("count");
    let signal = has("intensit") || has("signal") || is(&["cps", "yield", "events", "hits", "y"]);
    let sd = is(&["sd", "std", "err", "stdev", "stddev", "esd"])
        || ["sigma", "error", "uncertain", "deviation"]
            .iter()
            .any(|w| has(w));
    if sd {
        // The error of an energy is no error of the counts.
        return (meaning == Meaning::Unsaid && !energy).then_some(Role::Sd);
    }
    if plain || signal {
        return Some(Role::Counts { plain });
    }
    let any_axis = meaning != Meaning::Unsaid || energy || is(&["x"]);
    any_axis.then_some(Role::Axis(meaning))
}

/// How many of these names say what their column holds.
pub(super) fn telling(names: &[String]) -> usize {
    names.iter().filter(|name| role(name).is_some()).count()
}

/// What a name says the axis is.
pub(super) fn meaning(name: &str) -> Meaning {
    let lower = name.to_lowercase();
    let words = words(name);
    let has = |part: &str| lower.contains(part);
    let is = |list: &[&str]| words.iter().any(|w| list.contains(&w.as_str()));
    if has("wavenumber") || has("cm-1") || has("cm^-1") || has("cm⁻¹") || has("1/cm") {
        Meaning::Wavenumber
    } else if has("kinetic") || is(&["ke", "eke", "ekin", "ek"]) {
        Meaning::Kinetic
    } else if has("binding")
        || has("ionization")
        || has("ionisation")
        || is(&["be", "ebe", "ie", "ip"])
    {
        Meaning::Ionization
    } else if has("time") || has("flight") || is(&["tof", "t", "ns"]) {
        Meaning::Time
    } else {
        Meaning::Unsaid
    }
}

/// The unit in an axis column's name, where it is one that this program does not convert.
pub(super) fn foreign_unit(name: &str, meaning: Meaning) -> Option<(String, &'static str)> {
    const TIMES: [&str; 7] = ["s", "ms", "us", "µs", "μs", "ps", "fs"];
    const ENERGIES: [&str; 8] = ["mev", "kev", "nm", "hartree", "joule", "j", "ry", "kcal"];
    let expected = match meaning {
        Meaning::Time => "nanoseconds",
        Meaning::Wavenumber => return None,
        _ => "eV (or a wavenumber in cm-1)",
    };
    let list: &[&str] = if meaning == Meaning::Time {
        &TIMES
    } else {
        &ENERGIES
    };
    let unit = words(name)
        .into_iter()
        .skip(1)
        .find(|w| list.contains(&w.as_str()))?;
    Some((unit, expected))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn units_that_are_not_converted_are_seen() {
        assert_eq!(foreign_unit("time_us", Meaning::Time).unwrap().0, "us");
        assert_eq!(
            foreign_unit("energy (meV)", Meaning::Unsaid).unwrap().0,
            "mev"
        );
        assert_eq!(foreign_unit("energy (eV)", Meaning::Unsaid), None);
        assert_eq!(foreign_unit("time_ns", Meaning::Time), None);
    }
}
