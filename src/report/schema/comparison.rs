//! Columns of a comparison: runs, groups, effects.

use super::{Table, count, flag, number, text, word};
use crate::compare::RunRow;
use crate::report::comparison::rows::{EffectRow, GroupRow};

/// `runs`: a row a run.
pub static RUNS: Table<RunRow> = Table {
    name: "runs",
    row: "a row a run, by group",
    columns: &[
        text("run", "name of the run", |r| Some(r.run.clone())),
        text("specimen", "what was tested; the run itself where none is named", |r| Some(r.specimen.clone())),
        text("group", "group it was compared in", |r| Some(r.group.clone())),
        text("kind", "kind of load: none, along, through, oblique, turning, no-axis", |r| word(r.kind)),
        number("stress_mpa", "MPa", 2, "median stress, compression positive; 0 without load", |r| Some(r.stress_mpa)),
        number("dose_mpa", "MPa", 2, "median dose; absent where the load turned or has no axis", |r| r.dose_mpa),
        number("followed_s", "s", 1, "time of the short, or of the last look", |r| Some(r.followed_s)),
        text("ended", "how it ended: short, stopped, broke, unknown", |r| word(r.ended)),
        number("charge_mah_per_cm2", "mAh/cm²", 5, "charge passed by then", |r| r.charge_mah_per_cm2),
        number("depth_um", "µm", 2, "depth by then", |r| r.depth_um),
        number("rate_um_per_min", "µm/min", 4, "rate of depth", |r| r.rate_um_per_min),
        number(
            "along_plates",
            "1",
            4,
            "mean cos 2γ to the plating edge: +1 along the plates, −1 straight across",
            |r| r.along_plates,
        ),
        number("to_load", "1", 4, "mean cos 2Δ to the load axis", |r| r.to_load),
        number("near_expected", "1", 4, "share of growth within 15° of the axis its load makes expected", |r| {
            r.near_expected
        }),
        number("turned", "1", 4, "share of the filaments turned aside, of those long enough to tell", |r| r.turned),
        count("filaments", "filaments rooted on the plating edge", |r| Some(r.filaments as u64)),
        number("ends_per_mm", "1/mm", 3, "ends of filaments on a millimetre of length", |r| r.ends_per_mm),
        text("report", "its report, from this comparison's folder", |r| r.report.clone()),
    ],
};

/// `groups`: a row a group.
pub static GROUPS: Table<GroupRow> = Table {
    name: "groups",
    row: "a row a group; means are over specimens",
    columns: &[
        text("group", "name of the group", |r| Some(r.group.clone())),
        text("kind", "kind of load; absent where several were put together", |r| r.kind.and_then(word)),
        number("dose_mpa", "MPa", 2, "median dose", |r| r.dose_mpa),
        count("runs", "runs", |r| Some(r.runs as u64)),
        count("specimens", "specimens", |r| Some(r.specimens as u64)),
        count("short", "runs that shorted", |r| Some(r.ends[0] as u64)),
        count("stopped", "runs that were stopped", |r| Some(r.ends[1] as u64)),
        count("broke", "runs whose specimen broke", |r| Some(r.ends[2] as u64)),
        count("unknown", "runs whose end is not known", |r| Some(r.ends[3] as u64)),
        number("median_s", "s", 1, "time by which half had shorted (Kaplan–Meier)", |r| r.median_s),
        number("median_low_s", "s", 1, "lower end of its 95 % interval", |r| r.median_ci95_s[0]),
        number("median_high_s", "s", 1, "upper end", |r| r.median_ci95_s[1]),
        number("restricted_mean_s", "s", 1, "mean time without a short, up to the end of the contrast", |r| {
            r.restricted_mean_s
        }),
        number(
            "share_short",
            "1",
            4,
            "share shorted by the end, breaking being another end; only where one broke",
            |r| r.shares.map(|s| s[0]),
        ),
        number("share_broke", "1", 4, "share broken by the end, likewise", |r| r.shares.map(|s| s[1])),
        number("along_plates", "1", 4, "alignment with the plates", |r| r.along_plates),
        number("to_load", "1", 4, "alignment with the load axis", |r| r.to_load),
        number("near_expected", "1", 4, "share of growth within 15° of the expected axis", |r| r.near_expected),
        number("turned", "1", 4, "share of the filaments turned aside", |r| r.turned),
        number("rate_um_per_min", "µm/min", 4, "rate of depth", |r| r.rate_um_per_min),
        number("ends_per_mm", "1/mm", 3, "ends of filaments on a millimetre of length", |r| r.ends_per_mm),
    ],
};

/// `effects`: a row a quantity a group.
pub static EFFECTS: Table<EffectRow> = Table {
    name: "effects",
    row: "a row a quantity a group, with its difference from the control",
    columns: &[
        text("quantity", "what is compared", |r| Some(r.quantity.clone())),
        text("unit", "its unit", |r| Some(r.unit.clone())),
        text("group", "group", |r| Some(r.group.clone())),
        flag("primary", "whether this is the contrast tested first", |r| Some(r.primary)),
        number("value", "", 5, "mean over specimens", |r| r.value),
        number("low", "", 5, "lower end of its 95 % interval", |r| r.ci95.map(|c| c[0])),
        number("high", "", 5, "upper end", |r| r.ci95.map(|c| c[1])),
        count("specimens", "specimens with a value", |r| r.specimens.map(|n| n as u64)),
        number("difference", "", 5, "difference from the control", |r| r.difference),
        number("difference_low", "", 5, "lower end of its 95 % interval", |r| r.difference_ci95.map(|c| c[0])),
        number("difference_high", "", 5, "upper end", |r| r.difference_ci95.map(|c| c[1])),
        flag("within_specimens", "whether it is taken within specimens that saw both loads", |r| r.within_specimens),
        number("p", "1", 5, "p of the permutation test", |r| r.p),
        number("smallest_p", "1", 5, "smallest p that these specimens could give", |r| r.smallest_p),
        number("p_holm", "1", 5, "p adjusted over the primary contrasts (Holm)", |r| r.p_holm),
        number("smallest_seen", "", 5, "smallest difference seen with 80 % power", |r| r.smallest_seen),
    ],
};
