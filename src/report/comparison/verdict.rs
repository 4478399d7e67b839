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
    let aside = sides.told(found, Quantity::Turned).map_or_else(String::new, |(a, b, _)| {
        format!(
            " {} % of the filaments turned aside, against {} %.",
            fixed(100.0 * b.value, 0),
            fixed(100.0 * a.value, 0)
        )
    });
    let claim = Claim::of(&gap, &a, &b);
    format!(
        "{} {} growth ran {way} than {}: alignment with the plates {} against {}, a difference of {}.{aside} {}",
        claim.answer,
        sentence(&under(sides.treated.1)),
        under(sides.control.1),
        signed(b.value, 2),
        signed(a.value, 2),
        sized(&gap, |v| signed(v, 2)),
        claim.basis
    )
}

fn slowed(found: &Comparison) -> String {
    let told = sides(found).and_then(|sides| Some((sides.told(found, Quantity::Rate)?, sides)));
    let Some(((a, b, gap), sides)) = told else {
        return "There is no rate of depth on both sides, so speeds cannot be compared.".to_owned();
    };
    let claim = Claim::of(&gap, &a, &b);
    let way = if gap.value < 0.0 { "slower" } else { "faster" };
    format!(
        "{} {} depth grew {way}: {} µm/min against {} µm/min {}, a difference of {}. {}",
        if claim.answer == Claim::YES && gap.value > 0.0 { "No, it grew faster." } else { claim.answer },
        sentence(&under(sides.treated.1)),
        figures(b.value, 3),
        figures(a.value, 3),
        under(sides.control.1),
        sized(&gap, |v| format!("{} µm/min", with_sign(v))),
        claim.basis
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

/// What may be claimed from a test: the answer in short, and what it rests on.
struct Claim {
    answer: &'static str,
    basis: String,
}

impl Claim {
    /// The answer where an effect is shown.
    const YES: &str = "Yes.";

    fn of(gap: &Gap, control: &Mean, treated: &Mean) -> Self {
        let few = |basis: &str| Self { answer: "Not enough to compare.", basis: basis.to_owned() };
        if control.specimens < 2 && treated.specimens < 2 {
            return few("One specimen under each load cannot tell the load from the specimen.");
        }
        let Some(test) = gap.test else {
            return few("No label can change places between these specimens, so nothing is tested.");
        };
        let adjusted = gap.p_holm.unwrap_or(test.p);
        if test.smallest_p >= SHOWN {
            let apart = gap.ci95.is_some_and(|[low, high]| low > 0.0 || high < 0.0);
            let normal = if apart {
                "; the interval takes specimens to scatter normally, which so few cannot bear out"
            } else {
                ""
            };
            let basis = format!("A test on these specimens cannot go below {}{normal}.", chance(test.smallest_p));
            return Self { answer: "Cannot be shown with these specimens.", basis };
        }
        let (answer, caveat) = match () {
            () if adjusted < SHOWN => (Self::YES, ""),
            () if test.p < SHOWN => ("Perhaps.", ""),
            () => ("Not shown.", " Not shown is not shown absent."),
        };
        let basis = format!(
            "{} ({} adjusted for all effects tested; {}{} arrangements of the labels).{caveat}",
            chance(test.p),
            chance(adjusted),
            if test.all { "all " } else { "" },
            test.arrangements
        );
        Self { answer, basis }
    }
}

fn chance(p: f64) -> String {
    if p < 0.001 { "p < 0.001".to_owned() } else { format!("p = {}", trimmed(p, 2)) }
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
            (_, Some(median)) => format!(", half of the runs by {}", duration(median)),
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
                    format!(" No test of this can go below {} with these specimens.", chance(test.smallest_p))
                }
                () if adjusted < SHOWN => format!(
                    " The load is shown to change the time to short (log-rank scores, {} after adjustment).",
                    chance(adjusted)
                ),
                () => format!(
                    " That the load changes the time to short is not shown (log-rank scores, {}).",
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
    let p = hazard.p.map_or_else(String::new, |p| format!("; {}", chance(p)));
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
        [None, None] => "the 95 % interval has no end on either side".to_owned(),
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
            "A single dose parts straight from turned filaments, so the curve has no finite slope and the dose for half no standard \
             error; with every run as one trial, {}.",
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
        Some(if seen > most { None } else { Some(format!("{}{unit} in {}", figures(seen, 2), quantity.words())) })
    };
    let all: Vec<Option<String>> =
        [of(Quantity::AlongPlates, ""), of(Quantity::Turned, ""), of(Quantity::Rate, " µm/min")]
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
    Some(format!("The smallest differences that these specimens would show with 80 % power: {}.", seen.join(", ")))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::compare::campaign::Campaign;
    use crate::compare::{Plan, RunRecord, compare};

    fn said(records: &[RunRecord]) -> Vec<[String; 2]> {
        verdict(&compare(records, &Plan::default()).unwrap())
    }

    #[test]
    fn a_clear_effect_is_claimed_with_its_size_first() {
        let campaign = Campaign { specimens: 10, specimen_logit: 0.3, ..Campaign::default() };
        let all = said(&campaign.draw(3, 0).measured);
        let steered = &all[0][1];
        assert!(
            steered.starts_with("Yes. Under “along the plates, 180 MPa” growth ran more along the plates"),
            "{steered}"
        );
        assert!(steered.find("95 % interval").unwrap() < steered.find("arrangements").unwrap(), "{steered}");
        assert!(all[3][1].starts_with("Half of the filaments turn aside at a dose of"), "{}", all[3][1]);
        assert!(all[4][1].contains("No load above the highest tested (180 MPa)"), "{}", all[4][1]);
    }

    #[test]
    fn one_specimen_each_is_plainly_not_enough() {
        let doses_mpa = vec![0.0, 180.0];
        let campaign = Campaign { specimens: 2, one_dose_each: true, repeats: 3, doses_mpa, ..Campaign::default() };
        let all = said(&campaign.draw(3, 0).measured);
        assert!(all[0][1].starts_with("Not enough to compare."), "{}", all[0][1]);
    }

    #[test]
    fn three_specimens_cannot_show_it() {
        let campaign = Campaign { specimens: 3, doses_mpa: vec![0.0, 180.0], ..Campaign::default() };
        let all = said(&campaign.draw(3, 0).measured);
        assert!(all[0][1].starts_with("Cannot be shown with these specimens."), "{}", all[0][1]);
        assert!(all[4][1].starts_with("Six specimens that each see both loads"), "{}", all[4][1]);
    }

    #[test]
    fn nothing_is_claimed_where_there_is_nothing() {
        let all = said(&Campaign { threshold_mpa: None, ..Campaign::default() }.draw(5, 1).measured);
        assert!(all[3][1].starts_with("No dose–response is seen"), "{}", all[3][1]);
        assert!(!all[0][1].starts_with("Yes."), "{}", all[0][1]);
    }
}
