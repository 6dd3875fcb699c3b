//! The population as sampled, beside what was asked for.

use super::pass::impossible_parameter;
use super::resolve::{Answer, Series, ranks_of};
use super::worker::Worker;
use super::{POPULATION_PERCENTILES, Realised, band_value};
use crate::cohort::{ASKED_PERCENTILES, Asked};
use crate::diagnostic::Fault;
use crate::math::LANES;
use crate::plan::Plan;
use crate::scenario::Spread;
use crate::summary::{Moments, Ranks};

/// Centres about which moments are taken: what is asked for, so that nothing cancels.
pub(super) fn centres(plan: &Plan) -> Vec<f64> {
    let scenario = plan.scenario();
    let covariates = &scenario.population.covariates;
    let asked = covariates.iter().map(|covariate| Asked::of(covariate, covariates).map_or(0.0, |asked| asked.mean));
    asked.chain(scenario.drug.parameters.iter().map(|parameter| parameter.typical)).collect()
}

/// Rows of the population table.
pub(super) fn realised(plan: &Plan, patients: u64, ranks: &[Ranks], answer: &Answer) -> Vec<Realised> {
    rows(plan, patients, ranks, &answer.quantities, &answer.moments)
}

/// The first patients, drawn here and now, without concentrations.
pub(super) fn sample(plan: &Plan, patients: u64, ranks: &[Ranks]) -> Result<Vec<Realised>, Fault> {
    let mut worker = Worker::new(plan);
    let mut values: Vec<Vec<f64>> = vec![Vec::with_capacity(patients as usize); plan.quantities()];
    let mut moments = vec![Moments::default(); plan.quantities()];
    let centres = centres(plan);
    for first in (0..patients).step_by(LANES) {
        let count = (patients - first).min(LANES as u64) as usize;
        worker.draw(first);
        if let Some(found) = plan.individuals.impossible(&worker.parameters, count) {
            return Err(impossible_parameter(plan, first + found.lane as u64 + 1, found));
        }
        for (index, row) in worker.covariates.iter().chain(&worker.parameters).enumerate() {
            values[index].extend_from_slice(&row[..count]);
            moments[index].absorb(row, centres[index], count);
        }
    }
    let all = ranks_of(ranks);
    let found: Vec<Series> = values
        .into_iter()
        .enumerate()
        .map(|(index, mut values)| {
            values.sort_by(f64::total_cmp);
            let classes = match plan.scenario().population.covariates.get(index).map(|c| &c.spread) {
                Some(Spread::Classes { names, .. }) => names.len(),
                _ => 0,
            };
            Series {
                tally: (0..classes)
                    .map(|class| values.iter().filter(|&&value| value == class as f64).count() as u64)
                    .collect(),
                values: all.iter().map(|&rank| values[rank as usize]).collect(),
                parts: None,
            }
        })
        .collect();
    Ok(rows(plan, patients, ranks, &found, &moments))
}

fn rows(plan: &Plan, patients: u64, ranks: &[Ranks], found: &[Series], moments: &[Moments]) -> Vec<Realised> {
    let scenario = plan.scenario();
    let covariates = &scenario.population.covariates;
    let centres = centres(plan);
    let mut rows = Vec::new();
    for (index, series) in found.iter().enumerate() {
        let covariate = covariates.get(index);
        if let Some(Spread::Classes { names, proportions }) = covariate.map(|covariate| &covariate.spread) {
            let name = &covariates[index].name;
            rows.extend(names.iter().zip(proportions).zip(&series.tally).map(|((class, asked), count)| Realised {
                quantity: format!("{name} = {class}"),
                unit: "1".to_owned(),
                statistic: "share".to_owned(),
                asked: Some(*asked),
                realised: *count as f64 / patients as f64,
            }));
            continue;
        }
        let (quantity, unit, asked) = if let Some(covariate) = covariate {
            let unit = covariate.unit.as_ref().map_or("1", |unit| unit.text.as_str());
            (covariate.name.as_str(), unit, Asked::of(covariate, covariates))
        } else {
            let role = scenario.drug.parameters[index - covariates.len()].role;
            (role.name(scenario.drug.model), role.unit(), None)
        };
        let (mean, sd) = moments[index].mean_and_sd(centres[index], patients);
        let mut row = |statistic: String, asked: Option<f64>, realised: f64| {
            rows.push(Realised { quantity: quantity.to_owned(), unit: unit.to_owned(), statistic, asked, realised });
        };
        row("mean".to_owned(), asked.map(|asked| asked.mean), mean);
        row("standard deviation".to_owned(), asked.map(|asked| asked.sd), sd);
        if mean != 0.0 {
            let cv = asked.filter(|asked| asked.mean != 0.0).map(|asked| asked.sd / asked.mean);
            row("coefficient of variation".to_owned(), cv, sd / mean);
        }
        let all = ranks_of(ranks);
        let at = |rank: u64| series.values[all.binary_search(&rank).expect("the rank was asked for")];
        for (place, (ranks, percent)) in ranks.iter().zip(POPULATION_PERCENTILES).enumerate() {
            debug_assert_eq!(ASKED_PERCENTILES[place] * 100.0, percent as f64);
            let asked = asked.and_then(|asked| asked.percentiles).map(|asked| asked[place]);
            row(format!("percentile {percent}"), asked, band_value(ranks, &at));
        }
    }
    rows
}
