//! The rule that turns evidence into one word. Reasons and figures: `docs/character.md`.

use super::evidence::Evidence;
use crate::levels::Verdict;

/// From this net overlap population on (electrons per pair) an orbital may count as bonding.
pub const BONDING_POPULATION: f64 = 0.035;
/// … if mixing across the bonds lowers its energy by at least this, eV.
pub const BONDING_INTERACTION_EV: f64 = -1.0;
/// An orbital whose non-neighbours repel counts as bonding all the same from this overlap
/// population in the bonds on …
pub const STRONG_BOND_POPULATION: f64 = 0.2;
/// … with at least this interaction across the bonds, eV.
pub const STRONG_BOND_INTERACTION_EV: f64 = -4.0;
/// Down from this net overlap population an orbital may count as antibonding …
pub const ANTIBONDING_POPULATION: f64 = -0.10;
/// … if mixing across the bonds raises its energy by at least this, eV.
pub const ANTIBONDING_INTERACTION_EV: f64 = 1.0;
/// An orbital that does neither is a lone pair from this share on one atom on.
pub const LONE_PAIR_SHARE: f64 = 0.60;
/// Bonds that hold and bonds that drive apart, both beyond this, leave no single word.
pub const MIXED_POPULATION: f64 = 0.25;

/// The verdict on one orbital or degenerate set.
pub fn verdict(evidence: &Evidence) -> Verdict {
    let net = evidence.net_overlap_population;
    let in_bonds = evidence.bonded_overlap_population();
    let interaction = evidence.bond_interaction_ev();
    let holds = net >= BONDING_POPULATION && interaction <= BONDING_INTERACTION_EV;
    let holds_firmly =
        in_bonds >= STRONG_BOND_POPULATION && interaction <= STRONG_BOND_INTERACTION_EV;
    let drives_apart = net <= ANTIBONDING_POPULATION && interaction >= ANTIBONDING_INTERACTION_EV;
    let sum_of = |sign: f64| -> f64 {
        evidence
            .bonds
            .iter()
            .map(|b| (sign * b.overlap_population).max(0.0))
            .sum()
    };
    if holds || holds_firmly {
        Verdict::Bonding
    } else if drives_apart {
        Verdict::Antibonding
    } else if evidence.largest_share() >= LONE_PAIR_SHARE {
        Verdict::LonePair
    } else if sum_of(1.0) >= MIXED_POPULATION && sum_of(-1.0) >= MIXED_POPULATION {
        Verdict::Mixed
    } else {
        Verdict::Nonbonding
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::orbitals::evidence::BondEvidence;

    fn judge(net: f64, bonds: &[(f64, f64)], largest: f64) -> Verdict {
        let bond = |&(overlap_population, interaction_ev): &(f64, f64)| BondEvidence {
            atoms: [0, 1],
            overlap_population,
            pi_part: 0.0,
            interaction_ev,
        };
        verdict(&Evidence {
            orbitals: 0..1,
            atom_shares: vec![largest, 1.0 - largest],
            net_overlap_population: net,
            bonds: bonds.iter().map(bond).collect(),
            pi_share: None,
            s_share: 0.0,
        })
    }

    #[test]
    fn the_rule_reads_as_written() {
        assert_eq!(judge(0.5, &[(0.5, -8.0)], 0.5), Verdict::Bonding);
        // Overlap without a gain of energy is not a bond, and the reverse neither.
        assert_eq!(judge(0.5, &[(0.5, 0.0)], 0.5), Verdict::Nonbonding);
        assert_eq!(judge(0.0, &[(0.0, -2.0)], 0.5), Verdict::Nonbonding);
        assert_eq!(
            judge(-0.1, &[(0.6, -9.0), (-0.1, 0.0)], 0.3),
            Verdict::Bonding
        );
        assert_eq!(judge(-0.3, &[(-0.3, 2.0)], 0.5), Verdict::Antibonding);
        assert_eq!(judge(-0.3, &[(-0.3, 0.4)], 0.9), Verdict::LonePair);
        assert_eq!(judge(0.0, &[(0.0, 0.0)], 0.61), Verdict::LonePair);
        assert_eq!(judge(0.0, &[(0.3, -3.0), (-0.3, 1.0)], 0.5), Verdict::Mixed);
    }
}
