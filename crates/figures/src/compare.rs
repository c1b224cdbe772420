//! Several DUTs: means, spread between them, differences of groups.
//!
//! The spread between DUTs and the uncertainty of measuring one are kept apart: the first is
//! statistics of the values, the second is in every budget and does not shrink with the number of
//! DUTs, since one sink errs alike for all. Groups as small as three are the rule here, so
//! everything is Student's t and nothing is normal by decree.
//!
//! Invariants:
//! - No value is dropped. One that lies far off is named.
//! - What too few values cannot tell is said.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};
use sink::accumulate::Moments;
use sink::uncertainty::{DegreesOfFreedom, coverage_factor};
use statrs::distribution::{ContinuousCDF, StudentsT};

use crate::figure::{Figures, Name, PROBABILITY, Unit};
use crate::least_squares::number;

/// Level of the test for outliers.
const OUTLIER_LEVEL: f64 = 0.05;

/// Every figure that at least one group has, with what the groups say of it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Comparison {
    /// The figures, in the order of their names.
    pub figures: Vec<Compared>,
    /// The probability that intervals cover.
    pub probability: f64,
    /// How it was worked out.
    pub methods: Vec<String>,
}

/// One figure across the groups.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Compared {
    /// What it is of.
    pub name: Name,
    /// The label it is of; `None`: the whole run.
    pub label: Option<String>,
    /// Unit of all values.
    pub unit: Unit,
    /// The groups that have it, in the order they were given.
    pub groups: Vec<Group>,
    /// Every pair of groups with at least two values each.
    pub differences: Vec<Difference>,
}

/// One figure in one group.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Group {
    /// The group's name.
    pub name: String,
    /// The records and their values; of several steps of one record the mean.
    pub values: Vec<(String, f64)>,
    /// Mean of the values.
    pub mean: f64,
    /// Standard deviation between the values; `None` for fewer than two.
    pub standard_deviation: Option<f64>,
    /// Confidence interval of the mean by Student's t; `None` for fewer than two.
    pub interval: Option<[f64; 2]>,
    /// Standard uncertainty of measuring one value: the root mean square of the figures' own.
    pub measurement: Option<f64>,
    /// Records whose value the test names as an outlier.
    pub outliers: Vec<String>,
    /// What the values cannot tell.
    pub notes: Vec<String>,
}

/// The difference of two groups.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Difference {
    /// The group taken off...
    pub from: String,
    /// ...this one.
    pub of: String,
    /// Mean of `of` less mean of `from`.
    pub difference: f64,
    /// Its standard error from the spread of both.
    pub standard_error: f64,
    /// Degrees of freedom after Welch and Satterthwaite.
    pub degrees_of_freedom: f64,
    /// Its confidence interval.
    pub interval: [f64; 2],
    /// How probable so large a difference is if there is none.
    pub probability: f64,
    /// Standard uncertainty of the difference from measuring, if the two groups were measured
    /// independently; by one sink under one certificate most of it cancels.
    pub measurement: Option<f64>,
}

/// Compares groups of DUTs, figure by figure.
pub fn compare(groups: &[(&str, Vec<Figures>)]) -> Comparison {
    type Key = (Name, Option<String>);
    let mut found: BTreeMap<Key, (Unit, Vec<Group>)> = BTreeMap::new();
    for (name, records) in groups {
        for (key, (unit, members)) in members(records) {
            let group = Group::of((*name).to_owned(), &members);
            let entry = found.entry(key).or_insert_with(|| (unit, Vec::new()));
            entry.1.push(group);
        }
    }
    let figures = found
        .into_iter()
        .map(|((name, label), (unit, groups))| Compared {
            name,
            label,
            unit,
            differences: differences(&groups),
            groups,
        })
        .collect();
    Comparison {
        figures,
        probability: PROBABILITY,
        methods: [
            "interval of a mean: Student's t (Student, Biometrika 6 (1908) 1)",
            "difference of two groups: Welch's t with the degrees of freedom of Welch and \
             Satterthwaite (Welch, Biometrika 34 (1947) 28)",
            "outliers: Grubbs' two-sided test at 5 % (Grubbs, Technometrics 11 (1969) 1)",
        ]
        .map(str::to_owned)
        .to_vec(),
    }
}

/// One record's value of a figure.
struct Member {
    record: String,
    values: Moments,
    measurement: Option<f64>,
}

fn members(records: &[Figures]) -> BTreeMap<(Name, Option<String>), (Unit, Vec<Member>)> {
    let mut members: BTreeMap<(Name, Option<String>), (Unit, Vec<Member>)> = BTreeMap::new();
    for record in records {
        for figure in &record.figures {
            let key = (figure.name, figure.label.clone());
            let entry = members.entry(key).or_insert((figure.unit, Vec::new()));
            let measurement = figure
                .uncertainty
                .map(|combined| combined.standard_uncertainty);
            match entry.1.last_mut() {
                Some(last) if last.record == record.record => last.values.add(figure.value),
                Some(_) | None => entry.1.push(Member {
                    record: record.record.clone(),
                    values: [figure.value].into_iter().collect(),
                    measurement,
                }),
            }
        }
    }
    members
}

impl Group {
    fn of(name: String, members: &[Member]) -> Self {
        let values: Vec<(String, f64)> = members
            .iter()
            .filter_map(|member| Some((member.record.clone(), member.values.mean()?)))
            .collect();
        let moments: Moments = values.iter().map(|(_, value)| *value).collect();
        let count = number(moments.number());
        let mean = moments.mean().unwrap_or(f64::NAN);
        let standard_deviation = moments.standard_deviation();
        let interval = standard_deviation.and_then(|deviation| {
            let factor = coverage_factor(PROBABILITY, DegreesOfFreedom::finite(count - 1.0))?;
            let half = factor * deviation / count.sqrt();
            Some([mean - half, mean + half])
        });
        let measured: Vec<f64> = members
            .iter()
            .filter_map(|member| member.measurement)
            .collect();
        let measurement = (!measured.is_empty() && measured.len() == members.len()).then(|| {
            let squares: f64 = measured.iter().map(|u| u * u).sum();
            (squares / number(measured.len())).sqrt()
        });
        let mut notes = Vec::new();
        let outliers = match standard_deviation {
            Some(deviation) if moments.number() >= 3 => outlier(&values, mean, deviation),
            Some(_) | None => None,
        };
        match moments.number() {
            0 | 1 => notes.push(
                "one value: neither a spread nor an interval of the mean can be told".to_owned(),
            ),
            2 => notes.push(
                "two values: the interval of the mean is wide, and no outlier can be told"
                    .to_owned(),
            ),
            3 => notes.push(
                "three values: an outlier is only told where the other two all but agree"
                    .to_owned(),
            ),
            _ => {}
        }
        if let (Some(deviation), Some(measurement)) = (standard_deviation, measurement)
            && deviation < measurement
        {
            notes.push(
                "the spread is smaller than the uncertainty of measuring one value: what is \
                 common to all measurements does not show in it"
                    .to_owned(),
            );
        }
        Self {
            name,
            values,
            mean,
            standard_deviation,
            interval,
            measurement,
            outliers: outliers.into_iter().collect(),
            notes,
        }
    }

    fn sample(&self) -> Option<Sample> {
        Some(Sample {
            count: number(self.values.len()),
            mean: self.mean,
            deviation: self.standard_deviation?,
        })
    }
}

/// Grubbs' test: the value farthest from the mean, if it is too far.
fn outlier(values: &[(String, f64)], mean: f64, deviation: f64) -> Option<String> {
    let count = number(values.len());
    let farthest = values
        .iter()
        .max_by(|one, other| (one.1 - mean).abs().total_cmp(&(other.1 - mean).abs()))?;
    let off = (farthest.1 - mean).abs() / deviation;
    (off > grubbs_critical(count, OUTLIER_LEVEL)?).then(|| farthest.0.clone())
}

/// The largest departure over the standard deviation that Grubbs' two-sided test bears.
pub(crate) fn grubbs_critical(count: f64, level: f64) -> Option<f64> {
    let freedom = count - 2.0;
    let distribution = StudentsT::new(0.0, 1.0, freedom).ok()?;
    let t = distribution.inverse_cdf(1.0 - level / (2.0 * count));
    let share = t * t / (freedom + t * t);
    Some((count - 1.0) / count.sqrt() * share.sqrt())
}

/// Number, mean and standard deviation of a group.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Sample {
    pub(crate) count: f64,
    pub(crate) mean: f64,
    pub(crate) deviation: f64,
}

/// A difference of two means with unequal spreads.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Welch {
    pub(crate) standard_error: f64,
    pub(crate) degrees_of_freedom: f64,
    pub(crate) probability: f64,
}

/// Welch's test of two groups; `None` if neither spreads.
pub(crate) fn welch(one: Sample, other: Sample) -> Option<Welch> {
    let variance = |sample: Sample| sample.deviation * sample.deviation / sample.count;
    let (a, b) = (variance(one), variance(other));
    let degrees_of_freedom =
        (a + b).powi(2) / (a * a / (one.count - 1.0) + b * b / (other.count - 1.0));
    let standard_error = (a + b).sqrt();
    let distribution = StudentsT::new(0.0, 1.0, degrees_of_freedom).ok()?;
    let t = (other.mean - one.mean) / standard_error;
    t.is_finite().then(|| Welch {
        standard_error,
        degrees_of_freedom,
        probability: 2.0 * distribution.sf(t.abs()),
    })
}

fn differences(groups: &[Group]) -> Vec<Difference> {
    let pairs = groups.iter().enumerate().flat_map(|(index, one)| {
        let rest = groups.iter().skip(index + 1);
        rest.map(move |other| (one, other))
    });
    pairs
        .filter_map(|(one, other)| {
            let test = welch(one.sample()?, other.sample()?)?;
            let freedom = DegreesOfFreedom::finite(test.degrees_of_freedom);
            let half = coverage_factor(PROBABILITY, freedom)? * test.standard_error;
            let difference = other.mean - one.mean;
            Some(Difference {
                from: one.name.clone(),
                of: other.name.clone(),
                difference,
                standard_error: test.standard_error,
                degrees_of_freedom: test.degrees_of_freedom,
                interval: [difference - half, difference + half],
                probability: test.probability,
                measurement: one
                    .measurement
                    .zip(other.measurement)
                    .map(|(one, other)| one.hypot(other)),
            })
        })
        .collect()
}
