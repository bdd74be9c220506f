//! Groups lines into bands.

use super::channels::Channels;
use super::model::{PER_LINE, Parameters};
use super::solver::Covariance;
use super::{Band, FitOptions, Grouping, Member, Peak};

/// What the grouping looks at.
pub(super) struct Features<'a> {
    pub peaks: &'a [Peak],
    pub covariance: &'a Covariance,
    pub first: usize,
    pub parameters: &'a Parameters,
    pub data: &'a Channels,
}

pub(super) fn group(features: &Features, options: &FitOptions) -> Vec<Grouping> {
    let _ = (
        PER_LINE,
        features.covariance,
        features.first,
        features.parameters,
        features.data,
        options,
    );
    let bands = features
        .peaks
        .iter()
        .enumerate()
        .map(|(k, p)| Band {
            id: k + 1,
            vertical_ev: p.position_ev,
            vertical_sd: p.position_sd,
            maximum_ev: p.position_ev,
            origin_ev: None,
            area: p.area,
            area_sd: p.area_sd,
            fwhm_ev: p.fwhm_ev,
            spacing_ev: None,
            significance: p.significance,
            peaks: vec![k],
            members: vec![Member {
                peak: k,
                position_ev: p.position_ev,
                position_sd: p.position_sd,
                area: p.area,
                area_sd: p.area_sd,
            }],
        })
        .collect();
    vec![Grouping {
        probability: 1.0,
        bands,
    }]
}
