//! What the load is known to have done, and what grew which way: rows and numbers, no computing.

use serde::{Deserialize, Serialize};

/// A row a step of the load.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct TurnRow {
    /// 1-based, in order of time.
    pub step: usize,
    /// When half the change of the load was reached, s.
    pub time_s: f64,
    /// Load axis before, degrees in [0, 180); absent without stress.
    pub axis_before_deg: Option<f64>,
    /// Load axis after.
    pub axis_after_deg: Option<f64>,
    /// Stress before, MPa, positive in compression.
    pub stress_before_mpa: f64,
    /// Stress after.
    pub stress_after_mpa: f64,
    /// Axis along which growth is expected after the step; absent when the load was taken off.
    pub expected_deg: Option<f64>,
    /// Mean axis of growth before its change point.
    pub growth_before_deg: Option<f64>,
    /// Mean axis of growth after it.
    pub growth_after_deg: Option<f64>,
    /// Mean angle turned toward the expected axis, degrees; negative is away from it.
    pub turned_deg: Option<f64>,
    /// Time that growth went on before it turned, s; only where it turned.
    pub lag_s: Option<f64>,
    /// Lower end of its 95 % interval, s.
    pub lag_low_s: Option<f64>,
    /// Upper end, s.
    pub lag_high_s: Option<f64>,
    /// Median length grown on by the filaments that followed, µm; only where growth turned.
    pub lag_um: Option<f64>,
    /// Lower end of its 95 % interval, µm; absent under six filaments that followed.
    pub lag_low_um: Option<f64>,
    /// Upper end, µm.
    pub lag_high_um: Option<f64>,
    /// Filaments that grew on both sides of the step.
    pub filaments: usize,
    /// Filaments that followed; 0 where growth did not turn.
    pub followed: usize,
    /// Mean gain of alignment with the expected axis over that of the same filaments without a step.
    pub gain: Option<f64>,
    /// One-sided p of no gain at this step.
    pub p: Option<f64>,
    /// What was seen.
    pub verdict: TurnVerdict,
}

/// What growth did at a step of the load.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum TurnVerdict {
    /// It turned toward the axis expected after the step.
    Turned,
    /// It did not turn: the load did nothing that shows.
    #[serde(rename = "did nothing")]
    DidNothing,
    /// Too little grew on both sides of the step, or too few filaments turned to be sure that they turned with it.
    #[default]
    #[serde(rename = "too few to say")]
    TooFew,
    /// The load was taken off: no turn is expected.
    #[serde(rename = "load taken off")]
    TakenOff,
}

/// Whether there was a load that could be judged by its steps.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum LoadKnown {
    /// No stress is known: there is no load to judge.
    #[default]
    NoStress,
    /// Stress is known, an axis in the picture is not.
    NoAxis,
    /// Both are known.
    Stress,
}

/// The load's effect within the run, over all its steps.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct TurnsSummary {
    /// What of the load is known.
    pub load: LoadKnown,
    /// Steps of the load while there was growth.
    pub steps: usize,
    /// Steps at which growth turned.
    pub turned: usize,
    /// Steps at which the load did nothing that shows.
    pub did_nothing: usize,
    /// Gain of alignment over all steps, less that without a step.
    pub gain: Option<f64>,
    /// The run's one test: one-sided p of no gain.
    pub p: Option<f64>,
    /// Filaments that the test rests on.
    pub filaments: Option<usize>,
}

/// A row a sign of the stress: how uneven the directions of growth are. No effect of the load is claimed by it.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct DirectionRow {
    /// `all`, `compression`, `tension` or `none` (no stress, or none known).
    pub stress: String,
    /// Filaments with growth in the set.
    pub filaments: usize,
    /// Growth pieces.
    pub pieces: usize,
    /// Their length, µm.
    pub length_um: f64,
    /// Mean axis in the picture, degrees in [0, 180).
    pub mean_axis_deg: Option<f64>,
    /// Mean resultant length of the doubled angles, 0 to 1.
    pub resultant: f64,
    /// von Mises concentration of the doubled angles; absent when all are parallel.
    pub kappa: Option<f64>,
    /// Rayleigh's p of no preferred axis.
    pub rayleigh_p: Option<f64>,
    /// Mean cos 2Δ to the load axis.
    pub alignment: Option<f64>,
    /// Mean cos 2Δ to the expected axis (V over n).
    pub toward_expected: Option<f64>,
    /// Lower end of its 95 % interval; absent under five filaments.
    pub toward_expected_low: Option<f64>,
    /// Upper end.
    pub toward_expected_high: Option<f64>,
    /// One-sided p of the V test about the expected axis.
    pub v_p: Option<f64>,
}

/// Turns of growth beside those that fracture mechanics predicts. A model, not a measurement.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct KinkModel {
    /// What went into the prediction.
    pub inputs: KinkInputs,
    /// By angle between growth and load axis, rising; empty classes are left out.
    pub bins: Vec<KinkBin>,
}

/// What went into the prediction: medians over the pieces compared.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct KinkInputs {
    /// Symbol of the metal.
    pub metal: String,
    /// Its molar volume, cm³/mol.
    pub molar_volume_cm3: f64,
    /// Cell voltage while plating, mV: the most that the overpotential can be.
    pub overpotential_mv: f64,
    /// Pressure F·η/V_m, MPa: the most that the filament can press with.
    pub pressure_mpa: f64,
    /// Stress, MPa, positive in compression.
    pub stress_mpa: f64,
    /// Its standard uncertainty, MPa.
    pub u_stress_mpa: Option<f64>,
    /// Half-length of the crack, µm: half of what the filament had grown.
    pub half_length_um: f64,
    /// Distance ahead at which the T-stress is felt, µm: half a growth piece.
    pub distance_um: f64,
    /// Turns compared.
    pub pieces: usize,
    /// Growth pieces left out because the model gives no prediction there: K_I ≤ 0.
    pub closed: usize,
}

/// Turns of the growth that ran at one class of angle to the load axis.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct KinkBin {
    /// Lower bound of the class, degrees.
    pub from_deg: f64,
    /// Upper bound.
    pub to_deg: f64,
    /// Mean turn from one piece to the next, toward the load axis, degrees.
    pub measured_deg: f64,
    /// Its 95 % interval, filaments as sampling units; absent under five.
    pub measured_ci95: Option<[f64; 2]>,
    /// Mean of the turns predicted for the same pieces.
    pub predicted_deg: f64,
    /// Turns in the class.
    pub pieces: usize,
    /// Filaments they belong to.
    pub filaments: usize,
}
