//! Columns of what the load and the charge did: turns, directions, charge, half-cycles.

use super::{Table, count, number, text, word};
use crate::results::{ChargeRow, DirectionRow, HalfCycleRow, TurnRow};

/// `turns`: a row a step of the load.
pub static TURNS: Table<TurnRow> = Table {
    name: "turns",
    row: "a row a step of the load while there was growth",
    columns: &[
        count("step", "steps of the load, in order of time, from 1", |r| Some(r.step as u64)),
        number("time_s", "s", 3, "when half the change of the load was reached", |r| Some(r.time_s)),
        number("axis_before_deg", "°", 2, "load axis before the step", |r| r.axis_before_deg),
        number("axis_after_deg", "°", 2, "load axis after it", |r| r.axis_after_deg),
        number("stress_before_mpa", "MPa", 3, "stress before, compression positive", |r| Some(r.stress_before_mpa)),
        number("stress_after_mpa", "MPa", 3, "stress after", |r| Some(r.stress_after_mpa)),
        number("expected_deg", "°", 2, "axis along which growth is expected after the step", |r| r.expected_deg),
        number("growth_before_deg", "°", 2, "mean axis of growth before its change point", |r| r.growth_before_deg),
        number("growth_after_deg", "°", 2, "mean axis of growth after it", |r| r.growth_after_deg),
        number("turned_deg", "°", 2, "mean angle turned toward the expected axis", |r| r.turned_deg),
        number("lag_s", "s", 3, "time that growth went on before it turned", |r| r.lag_s),
        number("lag_low_s", "s", 3, "lower end of its 95 % interval", |r| r.lag_low_s),
        number("lag_high_s", "s", 3, "upper end", |r| r.lag_high_s),
        number("lag_um", "µm", 2, "median length grown on by the filaments that followed", |r| r.lag_um),
        number("lag_low_um", "µm", 2, "lower end of its 95 % interval; needs six filaments", |r| r.lag_low_um),
        number("lag_high_um", "µm", 2, "upper end", |r| r.lag_high_um),
        count("filaments", "filaments that grew on both sides of the step", |r| Some(r.filaments as u64)),
        count("followed", "of them, those that followed; 0 where growth did not turn", |r| Some(r.followed as u64)),
        number("gain", "1", 4, "gain of alignment with the expected axis over that without a step", |r| r.gain),
        number("p", "1", 5, "one-sided p of no gain at this step", |r| r.p),
        text("verdict", "turned, did nothing, too few to say, or load taken off", |r| word(r.verdict)),
    ],
};

/// `directions`: a row a sign of the stress.
pub static DIRECTIONS: Table<DirectionRow> = Table {
    name: "directions",
    row: "a row a sign of the stress; it describes growth and claims no effect of the load",
    columns: &[
        text("stress", "all, compression, tension, or none (no stress, or none known)", |r| Some(r.stress.clone())),
        count("filaments", "filaments with growth in the set", |r| Some(r.filaments as u64)),
        count("pieces", "growth pieces", |r| Some(r.pieces as u64)),
        number("length_um", "µm", 2, "their length", |r| Some(r.length_um)),
        number("mean_axis_deg", "°", 2, "mean axis in the picture", |r| r.mean_axis_deg),
        number("resultant", "1", 5, "mean resultant length of the doubled angles", |r| Some(r.resultant)),
        number("kappa", "1", 4, "von Mises concentration of the doubled angles", |r| r.kappa),
        number("rayleigh_p", "1", 5, "Rayleigh's p of no preferred axis, filaments turned at random", |r| r.rayleigh_p),
        number("alignment", "1", 5, "mean cos 2Δ to the load axis", |r| r.alignment),
        number("toward_expected", "1", 5, "mean cos 2Δ to the expected axis", |r| r.toward_expected),
        number("toward_expected_low", "1", 5, "lower end of its 95 % interval; needs five filaments", |r| {
            r.toward_expected_low
        }),
        number("toward_expected_high", "1", 5, "upper end", |r| r.toward_expected_high),
        number("v_p", "1", 5, "one-sided p of the V test about the expected axis, filaments turned at random", |r| {
            r.v_p
        }),
    ],
};

/// `charge`: a row a usable frame.
pub static CHARGE: Table<ChargeRow> = Table {
    name: "charge",
    row: "a row a usable frame, where a current was logged",
    columns: &[
        count("frame", "frame number, from 0", |r| Some(r.frame as u64)),
        number("time_s", "s", 3, "seconds since the first frame", |r| Some(r.time_s)),
        number("charge_mah", "mAh", 6, "net charge passed since the first frame", |r| r.charge_mah),
        number("charge_mah_per_cm2", "mAh/cm²", 6, "the same over the electrode area", |r| r.charge_mah_per_cm2),
        number("plating_s", "s", 3, "time in plating since the first frame", |r| r.plating_s),
        number("current_ma", "mA", 5, "cell current, plating positive", |r| r.current_ma),
        number("current_ma_per_cm2", "mA/cm²", 5, "the same over the electrode area", |r| r.current_ma_per_cm2),
        count("half_cycle", "half-cycle then running", |r| r.half_cycle.map(|n| n as u64)),
        number("depth_um", "µm", 3, "depth", |r| r.depth_um),
        number("front_depth_um", "µm", 3, "depth of what is still visible", |r| r.front_depth_um),
        number("length_um", "µm", 2, "length of the filaments rooted on the plating edge", |r| r.length_um),
        number(
            "tip_speed_um_per_s",
            "µm/s",
            5,
            "mean speed of a free end, from the frame before to the one after",
            |r| r.tip_speed_um_per_s,
        ),
        number("stress_mpa", "MPa", 3, "stress along the load axis, compression positive", |r| r.stress_mpa),
        number(
            "visible_um3",
            "µm³",
            0,
            "projected area times the depth seen through: the most the track can hold",
            |r| r.visible_um3,
        ),
        number(
            "faraday_um3",
            "µm³",
            0,
            "metal of the net charge by Faraday's law; the track may be an empty crack",
            |r| r.faraday_um3,
        ),
    ],
};

/// `half_cycles`: a row a half-cycle.
pub static HALF_CYCLES: Table<HalfCycleRow> = Table {
    name: "half_cycles",
    row: "a row a half-cycle, from one change of the current's sign to the next",
    columns: &[
        count("half_cycle", "half-cycles in order of time, from 1", |r| Some(r.half_cycle as u64)),
        text("flow", "plating or stripping", |r| word(r.flow)),
        number("from_s", "s", 3, "its start", |r| Some(r.from_s)),
        number("to_s", "s", 3, "its end", |r| Some(r.to_s)),
        number("charge_mah", "mAh", 6, "charge passed in it", |r| r.charge_mah),
        number("charge_mah_per_cm2", "mAh/cm²", 6, "the same over the electrode area", |r| r.charge_mah_per_cm2),
        number("depth_gain_um", "µm", 3, "gain of depth in it", |r| r.depth_gain_um),
        number("length_gain_um", "µm", 2, "gain of length in it", |r| r.length_gain_um),
        number("retreat_um", "µm", 3, "how far what is still visible drew back in it", |r| r.retreat_um),
    ],
};
