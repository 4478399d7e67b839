//! A comparison laid out in rows, as its tables and its page need them. Nothing is computed.

use crate::compare::Comparison;
use crate::compare::effects::{Gap, Quantity};
use crate::compare::endings::{Clock, Endings};
use crate::compare::groups::Kind;

/// A row a group.
#[derive(Debug, Clone, PartialEq)]
pub struct GroupRow {
    /// Name.
    pub group: String,
    /// Kind of load.
    pub kind: Option<Kind>,
    /// Median dose, MPa.
    pub dose_mpa: Option<f64>,
    /// Runs.
    pub runs: usize,
    /// Specimens.
    pub specimens: usize,
    /// Runs by end: short, stopped, broke, unknown.
    pub ends: [usize; 4],
    /// Shares shorted and broken by the end, breaking being another end; only where a specimen broke.
    pub shares: Option<[f64; 2]>,
    /// Time by which half had shorted, s.
    pub median_s: Option<f64>,
    /// Its interval.
    pub median_ci95_s: [Option<f64>; 2],
    /// Mean time without a short, s.
    pub restricted_mean_s: Option<f64>,
    /// Alignment with the plates.
    pub along_plates: Option<f64>,
    /// Alignment with the load axis.
    pub to_load: Option<f64>,
    /// Share of growth near the expected axis.
    pub near_expected: Option<f64>,
    /// Share of filaments turned aside.
    pub turned: Option<f64>,
    /// Rate of depth, µm/min.
    pub rate_um_per_min: Option<f64>,
    /// Ends on a millimetre.
    pub ends_per_mm: Option<f64>,
}

/// A row a quantity a group.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct EffectRow {
    /// The quantity in words.
    pub quantity: String,
    /// Its unit.
    pub unit: String,
    /// The group.
    pub group: String,
    /// Whether it is the primary contrast.
    pub primary: bool,
    /// Mean over specimens.
    pub value: Option<f64>,
    /// Its interval.
    pub ci95: Option<[f64; 2]>,
    /// Specimens with a value.
    pub specimens: Option<usize>,
    /// Difference from the control.
    pub difference: Option<f64>,
    /// Its interval.
    pub difference_ci95: Option<[f64; 2]>,
    /// Whether it is taken within specimens.
    pub within_specimens: Option<bool>,
    /// p of the permutation test.
    pub p: Option<f64>,
    /// Smallest p that could be.
    pub smallest_p: Option<f64>,
    /// Adjusted p.
    pub p_holm: Option<f64>,
    /// Smallest difference seen with 80 % power.
    pub smallest_seen: Option<f64>,
}

/// The groups, in their order.
pub fn groups(found: &Comparison) -> Vec<GroupRow> {
    let value = |quantity: Quantity, g: usize| {
        let effect = found.effects.iter().find(|e| e.quantity == quantity)?;
        effect.groups.get(g).copied().flatten().map(|mean| mean.value)
    };
    let row = |g: usize| {
        let group = &found.groups[g];
        let ends = found.time.as_ref().and_then(|t| t.groups.get(g)).cloned().unwrap_or_default();
        GroupRow {
            group: group.name.clone(),
            kind: group.kind,
            dose_mpa: group.dose_mpa,
            runs: group.members.len(),
            specimens: group.specimens,
            ends: [ends.short, ends.stopped, ends.broke, ends.unknown],
            shares: ends.incidence.last().map(|last| [last.short, last.broke]),
            median_s: ends.median,
            median_ci95_s: ends.median_ci95,
            restricted_mean_s: ends.restricted_mean,
            along_plates: value(Quantity::AlongPlates, g),
            to_load: value(Quantity::ToLoad, g),
            near_expected: value(Quantity::NearExpected, g),
            turned: value(Quantity::Turned, g),
            rate_um_per_min: value(Quantity::Rate, g),
            ends_per_mm: value(Quantity::EndsPerMm, g),
        }
    };
    (0..found.groups.len()).map(row).collect()
}

/// All effects: quantities in their order, groups in theirs, the clocks last.
pub fn effects(found: &Comparison) -> Vec<EffectRow> {
    let is_primary = |g: usize| found.contrast.as_ref().is_some_and(|c| c[1] == found.groups[g].name);
    let mut rows: Vec<EffectRow> = Vec::new();
    for effect in &found.effects {
        for (g, group) in found.groups.iter().enumerate() {
            let base = EffectRow {
                quantity: effect.quantity.words().to_owned(),
                unit: effect.quantity.unit().to_owned(),
                group: group.name.clone(),
                primary: is_primary(g),
                value: effect.groups[g].map(|m| m.value),
                ci95: effect.groups[g].and_then(|m| m.ci95),
                specimens: effect.groups[g].map(|m| m.specimens),
                ..EffectRow::default()
            };
            rows.push(with_gap(base, effect.differences[g].as_ref()));
        }
    }
    rows.extend([&found.time, &found.charge].into_iter().flatten().flat_map(|ends| clock(found, ends)));
    rows
}

fn clock(found: &Comparison, ends: &Endings) -> Vec<EffectRow> {
    let words = match ends.clock {
        Clock::Time => "mean time without a short, up to the end of the contrast",
        Clock::Charge => "mean charge without a short, up to the end of the contrast",
    };
    let row = |(g, group): (usize, &crate::compare::groups::Group)| {
        let primary = found.contrast.as_ref().is_some_and(|c| c[1] == group.name);
        let base = EffectRow {
            quantity: words.to_owned(),
            unit: ends.clock.unit().to_owned(),
            group: group.name.clone(),
            primary,
            value: ends.groups[g].restricted_mean,
            specimens: Some(group.specimens),
            ..EffectRow::default()
        };
        with_gap(base, ends.difference.as_ref().filter(|_| primary))
    };
    found.groups.iter().enumerate().map(row).collect()
}

fn with_gap(row: EffectRow, gap: Option<&Gap>) -> EffectRow {
    let Some(gap) = gap else { return row };
    EffectRow {
        difference: Some(gap.value),
        difference_ci95: gap.ci95,
        within_specimens: Some(gap.within_specimens),
        p: gap.test.map(|t| t.p),
        smallest_p: gap.test.map(|t| t.smallest_p),
        p_holm: gap.p_holm,
        smallest_seen: gap.smallest_seen,
        ..row
    }
}
