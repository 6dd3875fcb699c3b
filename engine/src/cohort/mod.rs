//! Virtual patients: uniforms become covariates.
//!
//! Each covariate reads one row of the unit cube under its own key, so adding one moves no other, and patient `k` is
//! the same whatever the size of the population.

mod distribution;
mod moments;

pub use distribution::Sampler;
pub use moments::{ASKED_PERCENTILES, Asked, quantile};

use crate::draw::Stream;
use crate::math::Row;
use crate::scenario::{Population, Spread};

/// Draws the covariates of any block of patients.
#[derive(Debug)]
pub struct Cohort {
    covariates: Vec<Drawn>,
}

#[derive(Debug)]
struct Drawn {
    stream: Stream,
    how: How,
}

#[derive(Debug)]
enum How {
    Number(Sampler),
    ByClass {
        of: usize,
        each: Vec<Sampler>,
    },
    /// Upper edges of the classes on the unit interval, the last left out.
    Classes(Vec<f64>),
}

impl Cohort {
    /// Prepares the covariates of a population. `cohort` 0 is the population itself; other numbers give fresh patients.
    pub fn new(population: &Population, cohort: u32) -> Self {
        let covariates = population
            .covariates
            .iter()
            .map(|covariate| Drawn {
                stream: Stream::new(population.seed, cohort, &format!("population.{}", covariate.name)),
                how: match &covariate.spread {
                    Spread::Number(limited) => How::Number(Sampler::new(limited)),
                    Spread::ByClass { of, each } => {
                        How::ByClass { of: *of, each: each.iter().map(Sampler::new).collect() }
                    }
                    Spread::Classes { proportions, .. } => How::Classes(upper_edges(proportions)),
                },
            })
            .collect();
        Self { covariates }
    }

    /// How many covariates there are.
    pub fn len(&self) -> usize {
        self.covariates.len()
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.covariates.is_empty()
    }

    /// Fills one row a covariate for the block whose first patient is `first`: values in the covariate's unit, or the
    /// index of the class.
    ///
    /// # Panics
    /// If `rows` is not as long as [`Cohort::len`].
    pub fn fill(&self, first: u64, rows: &mut [Row]) {
        assert_eq!(rows.len(), self.covariates.len(), "one row a covariate");
        for (index, drawn) in self.covariates.iter().enumerate() {
            let (before, from_here) = rows.split_at_mut(index);
            let row = &mut from_here[0];
            drawn.stream.fill_uniform(first, 0, row);
            match &drawn.how {
                How::Number(sampler) => sampler.transform(row),
                How::ByClass { of, each } => by_class(&before[*of], each, row),
                How::Classes(edges) => classes(edges, row),
            }
        }
    }
}

/// Where each class but the last ends on the unit interval.
fn upper_edges(proportions: &[f64]) -> Vec<f64> {
    let mut sum = 0.0;
    proportions[..proportions.len() - 1]
        .iter()
        .map(|share| {
            sum += share;
            sum
        })
        .collect()
}

/// Uniforms become class indices: the number of edges at or below the uniform.
fn classes(edges: &[f64], row: &mut Row) {
    for lane in &mut row.0 {
        let uniform = *lane;
        *lane = edges.iter().filter(|&&edge| uniform >= edge).count() as f64;
    }
}

/// Each lane through the distribution of its class.
fn by_class(class: &Row, each: &[Sampler], row: &mut Row) {
    let uniforms = *row;
    for (index, sampler) in each.iter().enumerate() {
        let mut mine = uniforms;
        sampler.transform(&mut mine);
        for (out, (value, class)) in row.iter_mut().zip(mine.iter().zip(class.iter())) {
            if *class == index as f64 {
                *out = *value;
            }
        }
    }
}
