//! Which column is what: by the user's choice, by the header's words, or by place.

use super::super::error::Problem;
use super::super::record::Meaning;
use super::super::words::{Role, role};
use super::super::{Axis, Choice, ReadOptions};

/// The chosen columns, counted from 0, and why.
#[derive(Debug, PartialEq, Default)]
pub(super) struct Columns {
    pub energy: usize,
    pub counts: usize,
    pub sd: Option<usize>,
    pub notes: Vec<String>,
}

const ENERGY: &str = "energies or flight times";
const COUNTS: &str = "counts";
const SD: &str = "standard deviations";

/// Chooses the columns among `width`; `names` is empty where there is no header.
pub(super) fn choose(
    names: &[String],
    width: usize,
    options: &ReadOptions,
) -> Result<Columns, Problem> {
    let find = |choice: &Option<Choice>, role| match choice {
        Some(choice) => by_choice(choice, names, width, role).map(Some),
        None => Ok(None),
    };
    let energy = find(&options.energy_column, ENERGY)?;
    let counts = find(&options.counts_column, COUNTS)?;
    let sd = find(&options.sd_column, SD)?;
    let roles: Vec<Option<Role>> = names.iter().map(|name| role(name)).collect();
    let mut notes = Vec::new();

    let taken = [energy, counts, sd];
    let free = |i: usize| !taken.contains(&Some(i));
    let energy_by_words = match energy {
        Some(_) => energy,
        None => axis_by_words(names, &roles, &free, options.axis.as_ref(), &mut notes)?,
    };
    let counts_by_words = match counts {
        Some(_) => counts,
        None => counts_by_words(names, &roles, &free)?,
    };
    let sd = match sd {
        Some(_) => sd,
        None => one_of(names, SD, "sd_column", |i| {
            free(i) && roles[i] == Some(Role::Sd)
        })?,
    };

    let energy = match (energy_by_words, counts_by_words) {
        (Some(energy), _) => energy,
        (None, Some(counts)) if width == 2 => 1 - counts,
        (None, counts) if counts != Some(0) && sd != Some(0) => 0,
        _ => {
            return Err(Problem::UnclearColumn {
                role: ENERGY,
                width,
                option: "energy_column",
            });
        }
    };
    let counts = match counts_by_words {
        Some(counts) => counts,
        None if width == 2 && energy < 2 => 1 - energy,
        None if energy == 0 && sd != Some(1) && energy_by_words.is_none() => 1,
        None if energy == 0 && sd != Some(1) && names.is_empty() => 1,
        None => {
            return Err(Problem::UnclearColumn {
                role: COUNTS,
                width,
                option: "counts_column",
            });
        }
    };
    let twice = |column: usize, first, second| {
        Err(Problem::ColumnTwice {
            column: column + 1,
            first,
            second,
        })
    };
    if energy == counts {
        return twice(energy, ENERGY, COUNTS);
    }
    if sd == Some(energy) {
        return twice(energy, ENERGY, SD);
    }
    if sd == Some(counts) {
        return twice(counts, COUNTS, SD);
    }
    if width > 2 && (energy_by_words.is_none() || counts_by_words.is_none()) {
        notes.push(format!(
            "columns {} and {} of {width} were taken as energy and counts, by their place",
            energy + 1,
            counts + 1
        ));
    }
    Ok(Columns {
        energy,
        counts,
        sd,
        notes,
    })
}

fn by_choice(
    choice: &Choice,
    names: &[String],
    width: usize,
    role: &'static str,
) -> Result<usize, Problem> {
    match choice {
        Choice::Number(wanted) if (1..=width).contains(wanted) => Ok(wanted - 1),
        Choice::Number(wanted) => Err(Problem::ColumnOutOfRange {
            wanted: *wanted,
            width,
            role,
        }),
        Choice::Name(wanted) => {
            let same = |a: &str, b: &str| a.trim().to_lowercase() == b.trim().to_lowercase();
            let exact = |i: usize| same(&names[i], wanted);
            let bare = |i: usize| same(without_unit(&names[i]), wanted);
            let hits: Vec<usize> = match (0..names.len()).any(exact) {
                true => (0..names.len()).filter(|&i| exact(i)).collect(),
                false => (0..names.len()).filter(|&i| bare(i)).collect(),
            };
            match hits[..] {
                [one] => Ok(one),
                [] => {
                    let wanted = wanted.clone();
                    Err(Problem::UnknownColumn {
                        wanted,
                        role,
                        there: listed(names, width),
                    })
                }
                _ => {
                    let candidates = numbered(names, &hits);
                    Err(Problem::AmbiguousColumn {
                        role,
                        candidates,
                        option: "its number",
                    })
                }
            }
        }
    }
}

fn listed(names: &[String], width: usize) -> String {
    if names.is_empty() {
        return format!("not named; choose by number, 1 to {width}");
    }
    names
        .iter()
        .map(|n| format!("'{n}'"))
        .collect::<Vec<_>>()
        .join(", ")
}

fn numbered(names: &[String], which: &[usize]) -> String {
    which
        .iter()
        .map(|&i| format!("{} '{}'", i + 1, names[i]))
        .collect::<Vec<_>>()
        .join(", ")
}

/// "Energy (eV)" and "Energy / eV" without what follows the bracket or stroke.
fn without_unit(name: &str) -> &str {
    name.split(['(', '[', '/']).next().unwrap_or(name).trim()
}

fn one_of(
    names: &[String],
    role: &'static str,
    option: &'static str,
    wanted: impl Fn(usize) -> bool,
) -> Result<Option<usize>, Problem> {
    let hits: Vec<usize> = (0..names.len()).filter(|&i| wanted(i)).collect();
    match hits[..] {
        [] => Ok(None),
        [one] => Ok(Some(one)),
        _ => Err(Problem::AmbiguousColumn {
            role,
            candidates: numbered(names, &hits),
            option,
        }),
    }
}

fn axis_by_words(
    names: &[String],
    roles: &[Option<Role>],
    free: &impl Fn(usize) -> bool,
    axis: Option<&Axis>,
    notes: &mut Vec<String>,
) -> Result<Option<usize>, Problem> {
    use Meaning::{Ionization, Kinetic, Time, Unsaid, Wavenumber};
    // An axis that was asked for is looked for first; a plain "energy" may be any of the others.
    let order: &[Meaning] = match axis {
        Some(Axis::Ionization) => &[Ionization, Unsaid],
        Some(Axis::Kinetic) => &[Kinetic, Unsaid],
        Some(Axis::Wavenumber) => &[Wavenumber, Ionization, Unsaid],
        Some(Axis::FlightTime { .. }) => &[Time],
        None => &[Ionization, Kinetic, Wavenumber, Unsaid, Time],
    };
    for meaning in order {
        let is = |i: usize| free(i) && roles[i] == Some(Role::Axis(*meaning));
        if let Some(found) = one_of(names, ENERGY, "energy_column", is)? {
            let is_axis = |i: usize| free(i) && matches!(roles[i], Some(Role::Axis(_)));
            let all: Vec<usize> = (0..names.len()).filter(|&i| is_axis(i)).collect();
            if all.len() > 1 && axis.is_none() {
                let (name, among) = (&names[found], numbered(names, &all));
                notes.push(format!(
                    "column '{name}' was taken as the axis, among {among}"
                ));
            }
            return Ok(Some(found));
        }
    }
    // What was asked for is not there by name: any single axis column will do, and the axis room
    // remarks on the contradiction.
    one_of(names, ENERGY, "energy_column", |i| {
        free(i) && matches!(roles[i], Some(Role::Axis(_)))
    })
}

fn counts_by_words(
    names: &[String],
    roles: &[Option<Role>],
    free: &impl Fn(usize) -> bool,
) -> Result<Option<usize>, Problem> {
    for plain in [true, false] {
        let is = |i: usize| free(i) && roles[i] == Some(Role::Counts { plain });
        if let Some(found) = one_of(names, COUNTS, "counts_column", is)? {
            return Ok(Some(found));
        }
    }
    Ok(None)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn names(list: &str) -> Vec<String> {
        list.split(',').map(|n| n.trim().to_string()).collect()
    }

    fn auto(list: &str) -> Result<Columns, Problem> {
        let names = names(list);
        choose(&names, names.len(), &ReadOptions::default())
    }

    #[test]
    fn header_words_choose() {
        for (list, energy, counts, sd) in [
            ("energy_ev,counts", 0, 1, None),
            ("Counts,Binding energy (eV)", 1, 0, None),
            ("n,Kinetic energy / eV,Intensity,sigma", 1, 2, Some(3)),
            ("flight_time_ns,counts", 0, 1, None),
            ("energy error,energy,counts,count error", 1, 2, Some(3)),
            ("IE,cps", 0, 1, None),
            ("counts,intensity,E", 2, 0, None),
            ("alpha,beta", 0, 1, None),
        ] {
            let chosen = auto(list).unwrap();
            assert_eq!(
                (chosen.energy, chosen.counts, chosen.sd),
                (energy, counts, sd),
                "{list}"
            );
        }
        let several = auto("radius_px,eKE_eV,eBE_eV,speed_distribution,intensity_per_eV").unwrap();
        assert_eq!((several.energy, several.counts), (2, 4));
        assert!(several.notes[0].contains("eBE_eV"), "{:?}", several.notes);
    }

    #[test]
    fn what_words_leave_open_is_an_error() {
        let both = auto("energy,counts a,counts b").unwrap_err().to_string();
        assert!(both.contains("2 'counts a', 3 'counts b'") && both.contains("counts_column"));
        let unclear = auto("energy,foo,bar").unwrap_err().to_string();
        assert!(unclear.contains("counts_column"), "{unclear}");
    }

    #[test]
    fn places_without_header() {
        let choose = |width, energy: Option<usize>, counts: Option<usize>| {
            let options = ReadOptions {
                energy_column: energy.map(Choice::Number),
                counts_column: counts.map(Choice::Number),
                ..Default::default()
            };
            choose(&[], width, &options)
                .map(|c| (c.energy, c.counts))
                .ok()
        };
        assert_eq!(choose(2, None, None), Some((0, 1)));
        assert_eq!(choose(3, None, None), Some((0, 1)));
        assert_eq!(choose(2, Some(2), None), Some((1, 0)));
        assert_eq!(choose(2, None, Some(1)), Some((1, 0)));
        assert_eq!(choose(3, None, Some(3)), Some((0, 2)));
        assert_eq!(choose(3, Some(1), None), Some((0, 1)));
        assert_eq!(choose(3, Some(2), None), None);
        assert_eq!(choose(3, None, Some(1)), None);
        assert_eq!(choose(3, Some(3), Some(3)), None);
        assert_eq!(choose(3, Some(0), None), None);
    }
}
