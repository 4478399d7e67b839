//! A comparison in five answers: did the load steer, did it slow, did it delay the short, from what dose on, what is missing.
//! The size of an effect comes before its p. "Not enough", "cannot be shown" and "outside the doses tested" are answers.

use crate::compare::Comparison;
use crate::compare::effects::{Effect, Gap, Mean, Quantity};
use crate::compare::endings::{Endings, STEP_MPA};
use crate::compare::groups::Group;
use crate::compare::threshold::{Answer, Curve, DoseResponse};
use crate::report::words::{counted, duration, figures, fixed, sentence, signed, trimmed};

/// Stands with every proposal of a load.
pub const CAUTION: &str = "Loading a brittle cell can break it, at any load and without warning; a cell on test can vent, burn or shatter, and \
     lithium reacts with water. Nothing on this page is an interlock, a safety limit or advice to load a cell. Follow your lab's own \
     rules, local codes and qualified people.";

/// p below which an effect is called shown (common practice).
const SHOWN: f64 = 0.05;

/// The answers with their headings, in order.
#[must_use]
pub fn verdict(found: &Comparison) -> Vec<[String; 2]> {
    let parts = [
        ("Steered?", steered(found)),
        ("Slowed?", slowed(found)),
        ("Shorts", shorts(found)),
        ("From what dose", dose(&found.turned, &found.along_plates)),
        ("What is missing", missing(found)),
    ];
    parts.into_iter().map(|(head, said)| [head.to_owned(), said]).collect()
}

/// The two groups of the primary contrast, and their numbers.
struct Sides<'a> {
    control: (usize, &'a Group),
    treated: (usize, &'a Group),
}

impl Sides<'_> {
    /// Means of control and treated, and their difference.
    fn told(&self, found: &Comparison, quantity: Quantity) -> Option<(Mean, Mean, Gap)> {
        let effect = effect(found, quantity)?;
        let [a, b] = [self.control.0, self.treated.0];
        Some((effect.groups[a]?, effect.groups[b]?, effect.differences[b]?))
    }
}

fn sides(found: &Comparison) -> Option<Sides<'_>> {
    let names = found.contrast.as_ref()?;
    let find = |name: &String| found.groups.iter().enumerate().find(|(_, g)| g.name == *name);
    Some(Sides { control: find(&names[0])?, treated: find(&names[1])? })
}

/// "without load", "under 180 MPa along the plates".
fn under(group: &Group) -> String {
    if group.kind == Some(crate::compare::groups::Kind::None) {
        "without load".to_owned()
    } else {
        format!("under “{}”", group.name)
    }
}

fn effect(found: &Comparison, quantity: Quantity) -> Option<&Effect> {
    found.effects.iter().find(|e| e.quantity == quantity)
}

fn steered(found: &Comparison) -> String {
    let Some(sides) = sides(found) else { return "All runs had one load: there is nothing to compare.".to_owned() };
    let Some((a, b, gap)) = sides.told(found, Quantity::AlongPlates) else {
        return "No growth was traced on one side of the comparison, so directions cannot be compared.".to_owned();
    };
    let way = if gap.value > 0.0 { "more along the plates" } else { "more straight across" };
    let size = format!(
        "{} growth ran {way} than {}: alignment with the plates {} against {}, a difference of {}",
        sentence(&under(sides.treated.1)),
        under(sides.control.1),
        signed(b.value, 2),
        signed(a.value, 2),
        sized(&gap, |v| signed(v, 2)),
    );
    let aside = sides.told(found, Quantity::Turned).map_or_else(String::new, |(a, b, _)| {
        format!(
            " {} % of the filaments turned aside, against {} %.",
            fixed(100.0 * b.value, 0),
            fixed(100.0 * a.value, 0)
        )
    });
    let claim = claim(&gap, &a, &b, "that the load steered growth");
    format!("{size}.{aside} {claim}")
}

fn slowed(found: &Comparison) -> String {
    let told = sides(found).and_then(|sides| Some((sides.told(found, Quantity::Rate)?, sides)));
    let Some(((a, b, gap), sides)) = told else {
        return "There is no rate of depth on both sides, so speeds cannot be compared.".to_owned();
    };
    let way = if gap.value < 0.0 { "slower" } else { "faster" };
    format!(
        "{} depth grew {way}: {} µm/min against {} µm/min {}, a difference of {} µm/min. {}",
        sentence(&under(sides.treated.1)),
        figures(b.value, 3),
        figures(a.value, 3),
        under(sides.control.1),
        sized(&gap, |v| with_sign(v)),
        claim(
            &gap,
            &a,
            &b,
            if gap.value < 0.0 { "that the load slowed the filaments" } else { "that the load sped the filaments" }
        ),
    )
}

/// Three figures and a sign.
fn with_sign(value: f64) -> String {
    let text = figures(value, 3);
    if value > 0.0 { format!("+{text}") } else { text }
}

/// The difference with its interval, or why there is none.
fn sized(gap: &Gap, show: impl Fn(f64) -> String) -> String {
    let on = counted(gap.specimens, "specimen", "specimens");
    match gap.ci95 {
        Some([low, high]) => format!("{} (95 % interval {} to {}, {on})", show(gap.value), show(low), show(high)),
        None => format!("{} ({on}: too few for an interval)", show(gap.value)),
    }
}

/// What may be claimed from a test.
fn claim(gap: &Gap, control: &Mean, treated: &Mean, what: &str) -> String {
    if control.specimens < 2 && treated.specimens < 2 {
        return "One specimen under each load is not enough to compare.".to_owned();
    }
    let Some(test) = gap.test else {
        return "No label can change places between these specimens, so nothing can be tested: not enough to compare."
            .to_owned();
    };
    let adjusted = gap.p_holm.unwrap_or(test.p);
    let basis = format!(
        "p = {}, {} after adjustment for all effects tested, {} {} arrangements",
        chance(test.p),
        chance(adjusted),
        if test.all { "from all" } else { "from" },
        test.arrangements
    );
    if test.smallest_p >= SHOWN {
        return format!(
            "It cannot be shown with these specimens {what}: the smallest p that their arrangements can give is {}.",
            chance(test.smallest_p)
        );
    }
    if adjusted < SHOWN {
        format!("This shows {what} ({basis}).")
    } else if test.p < SHOWN {
        format!("This suggests, but after adjustment for all effects tested does not show, {what} ({basis}).")
    } else {
        format!("This does not show {what} ({basis}); that does not show that it did not.")
    }
}

fn chance(p: f64) -> String {
    if p < 0.001 { "below 0.001".to_owned() } else { trimmed(p, 2) }
}

fn shorts(found: &Comparison) -> String {
    let (Some(sides), Some(time)) = (sides(found), &found.time) else {
        return "No times to short are known.".to_owned();
    };
    let told = |(g, group): (usize, &Group)| {
        let ends = &time.groups[g];
        let median = match (ends.short, ends.median) {
            (0, _) => {
                ends.ends.last().map_or_else(String::new, |last| format!(", followed for up to {}", duration(*last)))
            }
            (_, Some(median)) => format!(", half of them by {}", duration(median)),
            (_, None) => ", fewer than half".to_owned(),
        };
        let broke = if ends.broke > 0 { format!("; {} broke", ends.broke) } else { String::new() };
        format!(
            "{} {} of {} shorted{median}{broke}",
            under(group),
            if ends.short == 0 { "none".to_owned() } else { ends.short.to_string() },
            counted(ends.runs, "run", "runs")
        )
    };
    let mean = match (&time.difference, time.until) {
        (Some(gap), Some(until)) => {
            let over = format!("over the first {}", duration(until));
            let interval = gap.ci95.map_or_else(
                || " (too few specimens for an interval)".to_owned(),
                |[low, high]| format!(" (95 % interval {} to {})", duration(low), duration(high)),
            );
            let (many, way) = (duration(gap.value.abs()), if gap.value >= 0.0 { "longer" } else { "shorter" });
            format!(" {}, runs went {many} {way} without a short{interval}.", sentence(&over))
        }
        _ => String::new(),
    };
    let tested =
        time.difference.as_ref().and_then(|gap| gap.test.map(|t| (gap, t))).map_or_else(String::new, |(gap, test)| {
            let adjusted = gap.p_holm.unwrap_or(test.p);
            match () {
                () if test.smallest_p >= SHOWN => {
                    format!(" No test of this can go below p = {} with these specimens.", chance(test.smallest_p))
                }
                () if adjusted < SHOWN => format!(
                    " The load is shown to change the time to short (log-rank scores, p = {} after adjustment).",
                    chance(adjusted)
                ),
                () => format!(
                    " That the load changes the time to short is not shown (log-rank scores, p = {}).",
                    chance(test.p)
                ),
            }
        });
    format!("{}; {}.{mean}{tested}{}", sentence(&told(sides.control)), told(sides.treated), hazard(time))
}

fn hazard(time: &Endings) -> String {
    let Some(hazard) = &time.hazard else { return String::new() };
    let interval = hazard
        .ci95
        .map_or_else(String::new, |[low, high]| format!(", 95 % interval {} to {}", figures(low, 2), figures(high, 2)));
    let p = hazard.p.map_or_else(String::new, |p| format!("; p = {}", chance(p)));
    format!(
        " Over all doses, {} MPa more go with {} times the hazard of a short{interval}{p} ({}, {}).",
        fixed(STEP_MPA, 0),
        figures(hazard.ratio, 2),
        counted(hazard.shorts, "short", "shorts"),
        counted(hazard.specimens, "specimen", "specimens"),
    )
}

fn dose(turned: &DoseResponse, along: &DoseResponse) -> String {
    let mpa = |v: f64| fixed(v, 0);
    let ends = |r: &DoseResponse| match r.ci95 {
        [Some(low), Some(high)] => format!("95 % interval {} to {} MPa", mpa(low), mpa(high)),
        [Some(low), None] => format!("95 % interval from {} MPa, with no upper end", mpa(low)),
        [None, Some(high)] => format!("95 % interval up to {} MPa, with no lower end", mpa(high)),
        [None, None] => "the interval has no end on either side".to_owned(),
    };
    let curve = |r: &DoseResponse| match r.curve {
        Some(Curve::FlatThenRising) => ", by a curve that is flat first",
        _ => "",
    };
    let first = match (turned.answer, turned.half_mpa, turned.tested_mpa) {
        (Answer::Found, Some(half), _) => {
            format!(
                "Half of the filaments turn aside at a dose of {} MPa ({}{}).",
                mpa(half),
                ends(turned),
                curve(turned)
            )
        }
        (Answer::Open, Some(half), _) => {
            format!(
                "Half of the filaments may turn aside at about {} MPa, but these runs do not hold it: {}.",
                mpa(half),
                ends(turned)
            )
        }
        (Answer::OutsideTested, Some(half), Some([low, high])) => format!(
            "The dose at which half of the filaments turn aside lies outside the doses tested ({} to {} MPa): the curve puts it at \
             {} MPa, which is no more than a guess.",
            mpa(low),
            mpa(high),
            mpa(half)
        ),
        (Answer::Separated, Some(_), _) => format!(
            "The doses divide straight from turned filaments completely, so the curve has no finite slope and the dose for half no \
             standard error; with every run as one trial, {}.",
            ends(turned)
        ),
        (Answer::NoResponse, ..) => {
            "No dose–response is seen: the share turned aside does not rise with the dose as far as these runs tell."
                .to_owned()
        }
        _ => "Too few doses or specimens (at least two and three) to say from what dose on filaments turn aside."
            .to_owned(),
    };
    let second = match (along.answer, along.half_mpa) {
        (Answer::Found | Answer::Open, Some(half)) => {
            format!(
                " Growth as a whole runs as much along the plates as across at {} MPa ({}).",
                mpa(half),
                ends(along)
            )
        }
        _ => String::new(),
    };
    format!("{first}{second}")
}

fn missing(found: &Comparison) -> String {
    let mut said = Vec::new();
    if found.accept_mixed && found.differences.iter().any(|d| d.biases) {
        let what: Vec<&str> = found.differences.iter().filter(|d| d.biases).map(|d| d.what).collect();
        said.push(format!(
            "The runs differ in more than the load ({}), so no difference here can be put down to the load alone.",
            what.join(", ")
        ));
    }
    let reach: Vec<f64> = found
        .effects
        .iter()
        .flat_map(|e| &e.differences)
        .flatten()
        .filter(|g| g.p_holm.is_some())
        .filter_map(|g| g.test.map(|t| t.smallest_p))
        .collect();
    if reach.iter().copied().fold(f64::INFINITY, f64::min) >= SHOWN {
        said.push("Six specimens that each see both loads, or four under each, are the fewest with which a test can go below p = 0.05.".to_owned());
    }
    said.extend(power(found));
    said.extend(narrower(found));
    if let Some(highest) = found.next.highest_mpa {
        said.push(format!(
            "No load above the highest tested ({} MPa) is proposed: loading brittle cells can break them.",
            fixed(highest, 0)
        ));
    }
    said.join(" ")
}

/// What would narrow the dose for half, or find one.
fn narrower(found: &Comparison) -> Option<String> {
    let proposals: Vec<String> = found
        .next
        .best
        .iter()
        .filter_map(|p| {
            let (dose, width) = (fixed(p.dose_mpa, 0), figures(p.half_width_mpa?, 2));
            Some(format!("{} further specimens at {dose} MPa to ± {width} MPa", p.specimens))
        })
        .collect();
    if proposals.is_empty() {
        let highest = found.next.highest_mpa.filter(|h| *h > 0.0)?;
        let highest = fixed(highest, 0);
        return Some(format!(
            "To find the dose for half, spread further specimens over doses from no load to {highest} MPa."
        ));
    }
    let now = found
        .next
        .now_mpa
        .map_or_else(|| "which has no ends now".to_owned(), |now| format!("now ± {} MPa", figures(now, 2)));
    Some(format!("To narrow the dose for half ({now}): {} (simulated).", proposals.join(", ")))
}

/// The smallest differences that these specimens would show.
fn power(found: &Comparison) -> Option<String> {
    let sides = sides(found)?;
    let of = |quantity, unit: &str| {
        let seen = effect(found, quantity)?.differences[sides.treated.0]?.smallest_seen?;
        let most = match quantity {
            Quantity::AlongPlates => 2.0,
            Quantity::Turned => 1.0,
            _ => f64::INFINITY,
        };
        Some(if seen > most { None } else { Some(format!("{} of {}{unit}", figures(seen, 2), quantity.words())) })
    };
    let all: Vec<Option<String>> =
        [of(Quantity::AlongPlates, ""), of(Quantity::Turned, ""), of(Quantity::Rate, " (µm/min)")]
            .into_iter()
            .flatten()
            .collect();
    let seen: Vec<String> = all.iter().flatten().cloned().collect();
    if all.is_empty() {
        return None;
    }
    if seen.is_empty() {
        return Some(
            "With these specimens not even the largest effect there can be would be seen with 80 % power.".to_owned(),
        );
    }
    Some(format!("With 80 % power these specimens show differences from {} on.", seen.join(", ")))
}
