//! What the load and the charge did, in plain sentences. A load that did nothing is reported as having done nothing, and
//! "too few to say" is an answer.

use super::words::{bind, counted, duration, figures, fixed, sentence, signed, trimmed};
use crate::results::{LoadKnown, Results, TurnRow, TurnVerdict};

/// Stands with the directions by sign of stress.
pub const NO_EFFECT_CLAIMED: &str = "How uneven the directions of growth are, apart by sign of the stress. Filaments cross the gap whatever the load \
     does, so a small p here tells of a preferred axis, not of an effect of the load.";

/// Stands with the volumes.
pub const EMPTY_CRACK: &str = "The visible volume takes the track to fill the whole depth seen through and is the most it can hold; the track may be \
     an empty crack, and charge may plate elsewhere.";

/// Change of the load axis from which it is told, degrees.
const TOLD_DEG: f64 = 5.0;

/// Whether growth turned when the load did.
pub fn load(results: &Results) -> String {
    let turns = &results.summary.turns;
    let nothing_grew = results.growth.is_empty();
    match (turns.load, results.turns.as_slice()) {
        (LoadKnown::NoStress, _) => "No stress is known for this run, so there is no load to judge.".into(),
        (LoadKnown::NoAxis, _) => {
            "The load has no axis in the picture that growth could follow, so its effect is not judged.".into()
        }
        (LoadKnown::Stress, _) if nothing_grew => "With nothing grown there is no effect of the load to judge.".into(),
        (LoadKnown::Stress, []) => {
            "The load held steady while filaments grew. Without a step in it, this run alone cannot \
             tell an effect of the load from growth that runs this way anyway."
                .into()
        }
        (LoadKnown::Stress, [row]) => one_step(row),
        (LoadKnown::Stress, rows) => many_steps(results, rows),
    }
}

/// The same for the verdict, shorter: what changed stands in the part on the load.
pub fn load_in_short(results: &Results) -> String {
    let [row] = results.turns.as_slice() else { return load(results) };
    let p = row.p.map_or_else(String::new, |p| format!(" ({})", p_words(p)));
    let when = duration(row.time_s);
    match row.verdict {
        TurnVerdict::Turned => format!(
            "The load stepped at {when} and growth turned toward its new axis, by {}° on average: {} of {} followed{p}.",
            fixed(row.turned_deg.unwrap_or(0.0), 0),
            row.followed,
            counted(row.filaments, "filament", "filaments"),
        ),
        TurnVerdict::DidNothing => format!("The load stepped at {when} and did nothing that shows{p}."),
        TurnVerdict::TooFew => {
            format!("The load stepped at {when}; what grew on both sides is too little to say what it did{p}.")
        }
        TurnVerdict::TakenOff => load(results),
    }
}

/// What one step did.
fn one_step(row: &TurnRow) -> String {
    let what = step(row);
    let turned = row.turned_deg.unwrap_or(0.0);
    let out_of = counted(row.filaments, "filament", "filaments");
    let p = row.p.map_or_else(String::new, |p| format!(" ({})", p_words(p)));
    match row.verdict {
        TurnVerdict::Turned => format!(
            "{what}, and growth turned by {}° toward it{}{}: {} of {out_of} followed{p}.",
            fixed(turned, 0),
            lag(row),
            grown_on(row),
            row.followed,
        ),
        TurnVerdict::DidNothing => format!(
            "{what}, and the load did nothing that shows: on average growth turned by {}° toward the new axis, no more than \
             the same filaments turn at other times{p}. {} could be judged; a turn of less than about 20° stays unseen.",
            fixed(turned, 0),
            sentence(&out_of),
        ),
        TurnVerdict::TooFew if row.filaments > 0 && row.turned_deg.is_some() && row.p.is_some() => format!(
            "{what}. Growth then turned by {}° toward the new axis on average, but {out_of} are too few to say that this is \
             more than they turn at other times{p}.",
            fixed(turned, 0),
        )
        .replace("one filament are", "one filament is"),
        TurnVerdict::TooFew => {
            format!("{what}; too little grew before and after it to say whether growth turned.")
        }
        TurnVerdict::TakenOff => format!("{what}; no turn is expected of growth without a load, and none is judged."),
    }
}

/// When growth turned after the step.
fn lag(row: &TurnRow) -> String {
    match (row.lag_s, row.lag_low_s, row.lag_high_s) {
        (Some(lag), Some(low), Some(high)) => {
            format!(", {} after the step (95 % interval {} to {})", duration(lag), duration(low), duration(high))
        }
        _ => String::new(),
    }
}

fn grown_on(row: &TurnRow) -> String {
    row.lag_um.map_or_else(String::new, |um| {
        let ends = row.lag_low_um.zip(row.lag_high_um);
        let interval = ends.map_or_else(String::new, |(low, high)| {
            format!(" (95 % interval {} to {})", trimmed(low, 2), trimmed(high, 2))
        });
        format!(" and {} µm further on{interval}", trimmed(um, 2))
    })
}

/// The step itself: what changed of axis and stress.
fn step(row: &TurnRow) -> String {
    let when = duration(row.time_s);
    let stress = stress_change(row.stress_before_mpa, row.stress_after_mpa);
    match (row.axis_before_deg, row.axis_after_deg) {
        (Some(before), Some(after)) if apart(before, after) >= TOLD_DEG => {
            let same = (row.stress_before_mpa - row.stress_after_mpa).abs() < 0.1 * row.stress_before_mpa.abs();
            let size =
                if same { format!(" at {}", mpa(row.stress_after_mpa)) } else { format!(" and the stress {stress}") };
            format!("The load axis went from {}° to {}°{size} at {when}", fixed(before, 0), fixed(after, 0))
        }
        (_, None) => format!("The load of {} was taken off at {when}", mpa(row.stress_before_mpa)),
        (None, Some(after)) => {
            format!("A load of {} along {}° came on at {when}", mpa(row.stress_after_mpa), fixed(after, 0))
        }
        _ => format!("The stress went {stress} at {when}"),
    }
}

/// "from 150 to 120 MPa of compression", the sign twice only where it changes.
fn stress_change(before: f64, after: f64) -> String {
    if before * after > 0.0 {
        format!("from {} to {}", fixed(before.abs(), 0), mpa(after))
    } else {
        format!("from {} to {}", mpa(before), mpa(after))
    }
}

fn apart(a: f64, b: f64) -> f64 {
    let off = (a - b).rem_euclid(180.0);
    off.min(180.0 - off)
}

/// "150 MPa of compression", "no stress".
fn mpa(stress: f64) -> String {
    match fixed(stress.abs(), 0).as_str() {
        "0" => "no stress".into(),
        size if stress > 0.0 => format!("{size} MPa of compression"),
        size => format!("{size} MPa of tension"),
    }
}

fn p_words(p: f64) -> String {
    if p < 0.001 {
        "one-sided p\u{a0}<\u{a0}0.001".into()
    } else {
        format!("one-sided p\u{a0}=\u{a0}{}", trimmed(p, 2))
    }
}

fn many_steps(results: &Results, rows: &[TurnRow]) -> String {
    let with = |verdict| rows.iter().filter(|row| row.verdict == verdict).count();
    let told: Vec<String> = [
        (TurnVerdict::Turned, "growth turned toward the new axis"),
        (TurnVerdict::DidNothing, "the load did nothing that shows"),
        (TurnVerdict::TooFew, "the filaments are too few to say"),
        (TurnVerdict::TakenOff, "the load was taken off and no turn is expected"),
    ]
    .into_iter()
    .map(|(verdict, words)| (with(verdict), words))
    .filter(|(n, _)| *n > 0)
    .map(|(n, words)| if n == rows.len() { format!("at all of them {words}") } else { format!("at {n} {words}") })
    .collect();
    let test = results.summary.turns.p.map_or_else(String::new, |p| {
        let filaments = results.summary.turns.filaments.unwrap_or(0);
        format!(" Over all steps: {}, {}.", p_words(p), counted(filaments, "filament", "filaments"))
    });
    format!("The load stepped {} times while filaments grew: {}.{test}", rows.len(), told.join(", "))
}

/// Growth against charge; `None` where no current was logged.
pub fn charge(results: &Results) -> Option<String> {
    let charge = &results.summary.charge;
    if !charge.logged {
        return None;
    }
    let density = charge.charge_mah_per_cm2.map_or_else(String::new, |d| format!(" ({} mAh/cm²)", figures(d, 3)));
    let mut told = vec![charge.charge_mah.map_or_else(
        || "The current log leaves a hole, so the charge passed is not known at the end.".to_owned(),
        |mah| format!("By the last usable frame {} mAh{density} of net charge had passed.", figures(mah, 3)),
    )];
    let halves = |n: usize, flow: &str| match n {
        1 => format!("the one half-cycle of {flow}"),
        n => format!("each of {n} half-cycles of {flow}, by the median,"),
    };
    if let Some(gain) = charge.depth_gain_um {
        told.push(format!(
            "In {} depth grew by {} µm.",
            halves(charge.plating_half_cycles, "plating"),
            figures(gain, 3)
        ));
    }
    if let Some(retreat) = charge.retreat_um {
        told.push(format!(
            "In {} what is visible drew back by {} µm.",
            halves(charge.stripping_half_cycles, "stripping"),
            figures(retreat, 3)
        ));
    }
    if let (Some(visible), Some(metal)) = (charge.visible_um3, charge.faraday_um3) {
        told.push(format!(
            "The visible track could hold {} µm³ at most, {} times the {} µm³ of metal that the charge deposits.",
            millions(visible),
            figures(visible / metal, 2),
            millions(metal)
        ));
    }
    Some(bind(&told.join(" ")))
}

/// "3.2 million", or the number itself where it is less.
fn millions(um3: f64) -> String {
    if um3 >= 1e6 { format!("{} million", figures(um3 / 1e6, 3)) } else { figures(um3, 3) }
}

/// What the model of the kink rests on, and that it is one; `None` without one.
pub fn kink_inputs(results: &Results) -> Option<Vec<[String; 2]>> {
    let inputs = &results.summary.kink_model.as_ref()?.inputs;
    let u_stress = inputs.u_stress_mpa.map_or_else(|| "not given".into(), |u| format!("{} MPa", figures(u, 2)));
    let mut list = vec![
        ("median stress", format!("{} MPa", signed(inputs.stress_mpa, 0))),
        ("its uncertainty (k = 1)", u_stress),
        ("η at most: cell voltage", format!("{} mV", fixed(inputs.overpotential_mv, 1))),
        ("F·η/V_m at most", format!("{} MPa", fixed(inputs.pressure_mpa, 0))),
        ("V_m", format!("{}, {} cm³/mol", inputs.metal, figures(inputs.molar_volume_cm3, 4))),
        ("crack half-length", format!("{} µm", figures(inputs.half_length_um, 2))),
        ("T-stress felt ahead at", format!("{} µm", figures(inputs.distance_um, 2))),
        ("turns compared", inputs.pieces.to_string()),
    ];
    if inputs.closed > 0 {
        list.push(("without prediction (K_I ≤ 0)", inputs.closed.to_string()));
    }
    Some(list.into_iter().map(|(name, value)| [name.to_owned(), bind(&value)]).collect())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::example;

    fn with(row: TurnRow) -> String {
        let mut results = example::growing();
        results.turns = vec![row];
        load(&results)
    }

    fn turned() -> TurnRow {
        example::growing().turns[0].clone()
    }

    #[test]
    fn a_turn_is_told_with_lag_and_count() {
        let said = with(turned());
        for part in [
            "The load axis went from 90° to 30°",
            "turned by 52° toward it",
            "95 % interval",
            "µm further on",
            "7 of 9",
        ] {
            assert!(said.contains(part), "{said}");
        }
    }

    #[test]
    fn nothing_and_too_few_are_answers() {
        let nothing = TurnRow {
            verdict: TurnVerdict::DidNothing,
            followed: 0,
            turned_deg: Some(-3.2),
            p: Some(0.41),
            ..turned()
        };
        let said = with(nothing);
        assert!(
            said.contains("did nothing that shows") && said.contains("−3°") && said.contains("p\u{a0}=\u{a0}0.41"),
            "{said}"
        );
        let few = TurnRow { verdict: TurnVerdict::TooFew, filaments: 3, p: Some(0.19), ..turned() };
        let said = with(few.clone());
        assert!(said.contains("3 filaments are too few to say") && said.contains("52°"), "{said}");
        let none = TurnRow { filaments: 0, turned_deg: None, p: None, ..few };
        assert!(with(none).contains("too little grew"));
        let off = TurnRow { verdict: TurnVerdict::TakenOff, axis_after_deg: None, ..turned() };
        assert!(with(off).starts_with("The load of 150 MPa of compression was taken off at 12 min"));
    }

    #[test]
    fn without_a_load_there_is_none_to_judge() {
        let mut results = example::growing();
        results.turns.clear();
        assert!(load(&results).starts_with("The load held steady"));
        results.summary.turns.load = LoadKnown::NoAxis;
        assert!(load(&results).contains("no axis in the picture"));
        results.summary.turns.load = LoadKnown::NoStress;
        assert!(load(&results).contains("no load to judge"));
        assert_eq!(charge(&Results::default()), None);
    }

    #[test]
    fn several_steps_are_counted() {
        let mut results = example::growing();
        let still = TurnRow { verdict: TurnVerdict::DidNothing, ..turned() };
        results.turns = vec![turned(), still.clone(), still];
        let said = load(&results);
        assert!(
            said.contains("stepped 3 times")
                && said.contains("at 1 growth turned")
                && said.contains("at 2 the load did"),
            "{said}"
        );
    }

    #[test]
    fn a_change_of_stress_alone_is_told() {
        let row = TurnRow { axis_after_deg: Some(90.0), stress_before_mpa: 20.0, stress_after_mpa: -140.0, ..turned() };
        assert!(with(row).starts_with("The stress went from 20 MPa of compression to 140 MPa of tension at"));
    }
}
