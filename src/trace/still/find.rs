//! The lines of one picture that stand out: both polarities looked at alike, the threshold set by what texture makes.
//!
//! Method: saliences of the longest ways of all groups are mostly texture's; an exponential law is fitted to their middle
//! (median to upper quartile, so that up to a quarter may be filaments) in the filaments' polarity and in the opposite one,
//! and the salience that texture reaches with probability `CHANCE` a picture is the greater of both.
//! An exponential law for the tail of chance maxima is common practice.
//! Limits: a picture with few groups tells little of its texture; then [`LEAST_SALIENCE`] rules.

use ndarray::Array2;

use super::crest::{self, Pixel};
use super::evidence::{Evidence, look};
use super::joints;
use super::level::standing_out;
use super::tree::{Way, Weights, is_ring, longest};
use crate::scene::plane::quantile;

/// Evidence from which a pixel may be crest at all: about the median of texture's.
const ANY: f32 = 1.0;
/// How far a pixel stands out that belongs to a line.
const LOW: f32 = 1.4;
/// Lines of texture taken for filaments, expected in a picture.
const CHANCE: f64 = 0.1;
/// Salience asked of a line whatever the texture: ten widths of a line that stands out well.
const LEAST_SALIENCE: f32 = 30.0;
/// Groups from which their saliences are fitted.
const FEW: usize = 10;
/// Share of the salience of a filament that is asked of its branches.
pub(crate) const BRANCH: f32 = 0.33;

/// Lines that hang together.
#[derive(Debug, Clone)]
pub(crate) struct Group {
    /// All pixels.
    pub pixels: Vec<Pixel>,
    /// The longest way through them.
    pub longest: Way,
}

/// What stands out in a picture.
#[derive(Debug)]
pub(crate) struct Found {
    /// The groups, the most salient first.
    pub groups: Vec<Group>,
    /// Salience asked of a group.
    pub salience: f32,
    /// Evidence for lines.
    pub evidence: Evidence,
    /// How far crests stand out.
    pub standing: Array2<f32>,
}

impl Found {
    /// What ways are weighed by.
    pub(crate) fn weights(&self) -> Weights<'_> {
        Weights { standing: &self.standing, sigma: &self.evidence.sigma }
    }
}

/// Finds the lines of `plane` (positive on filaments) within `inside`.
#[must_use]
pub(crate) fn find(plane: &Array2<f32>, inside: &Array2<bool>) -> Found {
    let [lines, opposite] = look(plane);
    let texture = Candidates::of(&opposite, inside);
    let own = Candidates::of(&lines, inside);
    let salience = LEAST_SALIENCE.max(texture.chance_salience()).max(own.chance_salience());
    let mut groups = own.groups;
    groups.retain(|g| g.longest.score >= salience && !is_ring(&g.longest));
    groups.sort_by(|a, b| b.longest.score.total_cmp(&a.longest.score).then(a.pixels.cmp(&b.pixels)));
    Found { groups, salience, standing: own.standing, evidence: lines }
}

/// All groups of one polarity.
struct Candidates {
    groups: Vec<Group>,
    standing: Array2<f32>,
}

impl Candidates {
    fn of(evidence: &Evidence, inside: &Array2<bool>) -> Self {
        let mut crest = crest::crest(evidence, ANY);
        joints::remove(&mut crest, evidence);
        crest.zip_mut_with(inside, |c, &i| *c &= i);
        let standing = standing_out(&evidence.z, &crest);
        let weights = Weights { standing: &standing, sigma: &evidence.sigma };
        let groups = crest::groups(&standing, evidence, LOW);
        let groups =
            groups.into_iter().filter_map(|pixels| Some(Group { longest: longest(&pixels, weights)?, pixels }));
        Self { groups: groups.collect(), standing }
    }

    /// Salience that one of so many groups of texture exceeds with probability [`CHANCE`].
    fn chance_salience(&self) -> f32 {
        let mut scores: Vec<f32> = self.groups.iter().map(|g| g.longest.score).collect();
        if scores.len() < FEW {
            return 0.0;
        }
        let (Some(middle), Some(upper)) = (quantile(&mut scores, 0.5), quantile(&mut scores, 0.75)) else { return 0.0 };
        let decay = f64::from(upper - middle) / std::f64::consts::LN_2;
        middle + (decay * (0.5 * scores.len() as f64 / CHANCE).ln()) as f32
    }
}
