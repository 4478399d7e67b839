//! `comparison.html`: one file that opens offline, the verdict first. Its only links lead to the runs' own reports.

use minijinja::Environment;
use minijinja::value::Serde;
use serde::Serialize;

use super::figures::{FIGURES, Figure, Shown};
use super::rows;
use super::verdict::{CAUTION, verdict};
use crate::compare::RunRow;
use crate::compare::effects::{Gap, Mean};
use crate::compare::threshold::DoseResponse;
use crate::report::figures::Format;
use crate::report::words::{bind, counted, duration, figures, fixed, signed, trimmed};
use crate::report::{Error, page as run_page, svg};
use crate::run::manifest::Ended;

/// Name of the template; the ending switches escaping on.
const TEMPLATE: &str = "comparison.html";

#[derive(Serialize)]
struct Page {
    colours: String,
    css: String,
    title: String,
    facts: Vec<[String; 2]>,
    verdict: Vec<[String; 2]>,
    warnings: Vec<String>,
    figures: Vec<Drawn>,
    not_drawn: String,
    group_heads: Vec<String>,
    effects: Vec<Vec<String>>,
    tests: Vec<[String; 6]>,
    ends: Vec<[String; 9]>,
    fairness: Vec<[String; 4]>,
    runs: Vec<Row>,
    proposals: Vec<[String; 3]>,
    method: Vec<[String; 2]>,
    caution: &'static str,
    made_by: String,
}

#[derive(Serialize)]
struct Drawn {
    name: &'static str,
    title: &'static str,
    caption: String,
    wide: String,
    narrow: String,
}

#[derive(Serialize)]
struct Row {
    run: String,
    report: Option<String>,
    cells: Vec<String>,
}

/// The page as HTML.
///
/// # Errors
/// [`Error::Made`] when a figure or the template fails.
pub fn render(shown: Shown<'_>) -> Result<String, Error> {
    let page = page(shown)?;
    let mut environment = Environment::new();
    environment
        .add_template(TEMPLATE, include_str!("comparison.html"))
        .and_then(|()| environment.get_template(TEMPLATE)?.render(Serde(&page)))
        .map_err(|why| Error::made(TEMPLATE, why))
}

fn page(shown: Shown<'_>) -> Result<Page, Error> {
    let found = shown.found;
    let (mut drawn, mut missing) = (Vec::new(), Vec::new());
    for figure in &FIGURES {
        match draw(shown, figure)? {
            Some(figure) => drawn.push(figure),
            None => missing.push(figure.title.to_lowercase()),
        }
    }
    Ok(Page {
        colours: run_page::colours(),
        css: format!("{}\n{}", include_str!("../page.css"), include_str!("comparison.css")),
        title: found.contrast.as_ref().map_or_else(|| "Runs compared".to_owned(), |[a, b]| format!("{b} against {a}")),
        facts: vec![
            ["Runs".into(), found.runs.len().to_string()],
            ["Specimens".into(), found.specimens.to_string()],
            ["Groups".into(), found.groups.len().to_string()],
            ["Seed".into(), found.seed.to_string()],
        ],
        verdict: verdict(found).into_iter().map(|[head, said]| [head, bind(&said)]).collect(),
        warnings: found.warnings.clone(),
        figures: drawn,
        not_drawn: missing.join(", "),
        group_heads: found.groups.iter().map(|g| g.name.clone()).collect(),
        effects: effects(shown),
        tests: tests(shown),
        ends: ends(shown),
        fairness: found
            .differences
            .iter()
            .map(|d| {
                let unknown = if d.unknown > 0 {
                    format!("not known for {}", counted(d.unknown, "run", "runs"))
                } else {
                    String::new()
                };
                let values =
                    [d.values.clone(), unknown].into_iter().filter(|s| !s.is_empty()).collect::<Vec<_>>().join("; ");
                let effect = if d.biases { "would bias: accepted by --accept-mixed" } else { "shown, not refused" };
                [d.what.to_owned(), values, d.why.to_owned(), effect.to_owned()]
            })
            .collect(),
        runs: found.runs.iter().map(row).collect(),
        proposals: proposals(shown),
        method: method(shown),
        caution: CAUTION,
        made_by: format!("{} {}", found.tool, found.version),
    })
}

fn draw(shown: Shown<'_>, figure: &Figure) -> Result<Option<Drawn>, Error> {
    let paint = |format| (figure.draw)(shown, format).map(|drawing| svg::write(&drawing, 0.0)).transpose();
    let (Some(wide), Some(narrow)) = (paint(Format::Wide)?, paint(Format::Narrow)?) else { return Ok(None) };
    let band = shown.found.reference_mpa.as_ref().filter(|_| figure.name.starts_with("dose"));
    let caption = band.map_or_else(
        || figure.caption.to_owned(),
        |r| {
            format!(
                "{} The band from {} to {} MPa is from: {}. It enters no fit.",
                figure.caption, r.mpa[0], r.mpa[1], r.source
            )
        },
    );
    Ok(Some(Drawn { name: figure.name, title: figure.title, caption, wide, narrow }))
}

fn value(mean: Option<Mean>, unit: &str) -> String {
    let show = |v: f64| if unit == "1" { fixed(v, 2) } else { figures(v, 3) };
    match mean {
        Some(Mean { value, ci95: Some([low, high]), specimens, .. }) => {
            format!("{} ({} to {}; {specimens})", show(value), show(low), show(high))
        }
        Some(Mean { value, specimens, .. }) => format!("{} ({specimens})", show(value)),
        None => String::new(),
    }
}

/// A row a quantity: name, unit, a value a group.
fn effects(shown: Shown<'_>) -> Vec<Vec<String>> {
    let row = |e: &crate::compare::effects::Effect| {
        let unit = e.quantity.unit();
        let head = if unit == "1" { e.quantity.words().to_owned() } else { format!("{} ({unit})", e.quantity.words()) };
        std::iter::once(head).chain(e.groups.iter().map(|m| value(*m, unit))).collect()
    };
    shown.found.effects.iter().map(row).collect()
}

/// A row a difference: quantity, groups, difference, interval, p, smallest p.
fn tests(shown: Shown<'_>) -> Vec<[String; 6]> {
    let found = shown.found;
    let control = found.contrast.as_ref().map_or("", |c| c[0].as_str());
    let mut rows = Vec::new();
    let line = |quantity: &str, unit: &str, group: &str, gap: &Gap| {
        let show = |v: f64| if unit == "1" { signed(v, 2) } else { figures(v, 3) };
        let interval = gap.ci95.map_or_else(|| "too few".to_owned(), |[a, b]| format!("{} to {}", show(a), show(b)));
        let p = gap.test.map_or_else(String::new, |t| trimmed(t.p, 2));
        let p = gap.p_holm.map_or(p.clone(), |holm| format!("{p} (adjusted {})", trimmed(holm, 2)));
        let within = if gap.within_specimens { "within" } else { "between" };
        let on = format!("{}, {within}", gap.specimens);
        let unit = if unit == "1" { String::new() } else { format!(" {unit}") };
        let name = format!("{quantity}: {group} less {control}");
        [
            name,
            format!("{}{unit}", show(gap.value)),
            interval,
            on,
            p,
            gap.test.map_or_else(String::new, |t| trimmed(t.smallest_p, 2)),
        ]
    };
    for effect in &found.effects {
        for (group, gap) in found.groups.iter().zip(&effect.differences) {
            if let Some(gap) = gap {
                rows.push((
                    gap.p_holm.is_none(),
                    line(effect.quantity.words(), effect.quantity.unit(), &group.name, gap),
                ));
            }
        }
    }
    for ends in [&found.time, &found.charge].into_iter().flatten() {
        if let (Some(gap), Some([_, treated])) = (&ends.difference, &found.contrast) {
            let what = format!("restricted mean ({}) without a short", ends.clock.unit());
            rows.push((false, line(&what, ends.clock.unit(), treated, gap)));
        }
    }
    // The primary contrasts first, each in its order.
    rows.sort_by_key(|(secondary, _)| *secondary);
    rows.into_iter().map(|(_, row)| row).collect()
}

/// A row a group: runs, ends by kind, median with interval, shares shorted and broken.
fn ends(shown: Shown<'_>) -> Vec<[String; 9]> {
    let row = |g: rows::GroupRow| {
        let [short, stopped, broke, unknown] = g.ends.map(|n| n.to_string());
        let median = g.median_s.map_or_else(|| "not reached".to_owned(), duration);
        let interval = match g.median_ci95_s {
            [Some(low), Some(high)] => format!("{} to {}", duration(low), duration(high)),
            [Some(low), None] => format!("from {}", duration(low)),
            _ => String::new(),
        };
        let shares = g.shares.map_or_else(
            || "none broke".to_owned(),
            |[short, broke]| format!("{} % shorted, {} % broke", fixed(100.0 * short, 0), fixed(100.0 * broke, 0)),
        );
        [g.group, g.runs.to_string(), short, stopped, broke, unknown, median, interval, shares]
    };
    rows::groups(shown.found).into_iter().map(row).collect()
}

fn row(run: &RunRow) -> Row {
    let number = |v: Option<f64>, decimals: usize| v.map_or_else(String::new, |v| fixed(v, decimals));
    let ended = match run.ended {
        Ended::Short => "short",
        Ended::Stopped => "stopped",
        Ended::Broke => "broke",
        Ended::Unknown => "unknown",
    };
    Row {
        run: run.run.clone(),
        report: run.report.clone(),
        cells: vec![
            run.specimen.clone(),
            run.group.clone(),
            number(run.dose_mpa, 0),
            duration(run.followed_s),
            ended.to_owned(),
            number(run.depth_um, 0),
            number(run.rate_um_per_min, 2),
            number(run.along_plates, 2),
            number(run.to_load, 2),
            number(run.turned.map(|t| 100.0 * t), 0),
            run.filaments.to_string(),
        ],
    }
}

fn proposals(shown: Shown<'_>) -> Vec<[String; 3]> {
    let line = |p: &crate::compare::next::Proposal| {
        let width = p.half_width_mpa.map_or_else(|| "no end".to_owned(), |w| format!("± {} MPa", figures(w, 2)));
        [p.specimens.to_string(), format!("{} MPa", fixed(p.dose_mpa, 0)), width]
    };
    shown.found.next.best.iter().map(line).collect()
}

fn method(shown: Shown<'_>) -> Vec<[String; 2]> {
    let found = shown.found;
    let mut all: Vec<[&str; 2]> = vec![
        [
            "Unit",
            "The specimen. A run has one value, a specimen the mean of its runs, a group the mean of its specimens.",
        ],
        [
            "Groups",
            "Found from the runs: kind of load, then doses that lie within 10 MPa or 10 % of their neighbours; or as the user's \
             grouping says. The contrast tested first is chosen from loads and specimens alone.",
        ],
        [
            "Tests",
            "Permutation of the labels within specimens that saw both loads, else of whole specimens; all arrangements up to 20 000, \
             else 19 999 drawn with the seed above. Adjusted by Holm (1979) over the primary contrast of each effect; the others are \
             not adjusted and explore only.",
        ],
        [
            "Intervals",
            "Student’s t over specimens; paired where at least half of the specimens, and two or more, saw both loads. For times: \
             jackknife over specimens.",
        ],
        [
            "Time to short",
            "Kaplan–Meier (1958), log-log Greenwood limits for one run a specimen, else the jackknife over specimens; a broken specimen is \
             another end. Hazard by Cox (1972) with Efron’s ties.",
        ],
        [
            "Dose for half",
            "Logistic regression and a flat-then-rising curve, chosen by how well they foretell specimens left out; profile of the \
             deviance stretched for specimens (Rotnitzky & Jewell 1990), Student’s t.",
        ],
    ];
    let ranks = found.time.as_ref().and_then(|t| t.ranks_of_all.as_ref());
    let told = ranks.map(|r| {
        let strata = if r.stratified { "stratified by specimen" } else { "not stratified: no specimen saw two loads" };
        format!(
            "All groups: χ² {} on {} degrees of freedom, p {} by the χ² law, {strata}. With few shorts or specimens trust the permutation.",
            figures(r.chi_squared, 3),
            r.dof,
            trimmed(r.p_chi_squared, 2)
        )
    });
    let told = told.as_deref().unwrap_or("No log-rank test: no two groups were followed side by side.");
    all.push(["Log-rank", told]);
    let dosed = dosed(&found.turned);
    all.push(["Turned aside against dose", &dosed]);
    let no_hazard = found.time.as_ref().and_then(|t| t.no_hazard).map(|why| format!("No hazard ratio: {why}."));
    all.extend(no_hazard.as_deref().map(|why| ["Hazard", why]));
    all.into_iter().map(|pair| pair.map(str::to_owned)).collect()
}

/// How the curves foretold specimens left out, and the test of no response.
fn dosed(response: &DoseResponse) -> String {
    let foretold = response.foretold.map_or_else(
        || "The curves are not compared: there is no finite logistic line that rises.".to_owned(),
        |f| {
            format!(
                "Log score a filament on specimens left out, nearer to 0 is better: the same at every dose {}, logistic {}, flat then \
                 rising {}.",
                fixed(f.constant, 3),
                fixed(f.logistic, 3),
                fixed(f.flat_then_rising, 3)
            )
        },
    );
    let test = response.test.map_or_else(String::new, |t| {
        format!(
            " No response to the dose: p {} over {} arrangements (the smallest that could be: {}).",
            trimmed(t.p, 2),
            t.arrangements,
            trimmed(t.smallest_p, 2)
        )
    });
    format!("{foretold}{test}")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::compare::campaign::Campaign;
    use crate::compare::{Plan, RunRecord, compare};

    fn html(records: &[RunRecord]) -> String {
        let found = compare(records, &Plan { accept_mixed: true, ..Plan::default() }).unwrap();
        render(Shown { found: &found, records }).unwrap()
    }

    #[test]
    fn the_page_loads_nothing_and_says_the_caution() {
        let page = html(&Campaign::default().draw(7, 0).measured);
        assert!(page.contains("default-src 'none'") && page.contains("Loading a brittle cell can break it"));
        let addresses = page.matches("http://").count() + page.matches("https://").count();
        assert_eq!(addresses, page.matches("xmlns=\"http://www.w3.org/2000/svg\"").count());
        assert!(!page.contains("<script") && !page.contains("<link"));
    }

    #[test]
    fn hostile_names_are_inert() {
        let mut records = Campaign::default().draw(7, 0).measured;
        let hostile = "<script>alert(1)</script>\" onmouseover=\"x {{ 1234567*9 }}";
        for record in records.iter_mut().take(4) {
            record.run.push_str(hostile);
            record.specimen = Some(hostile.into());
            record.warnings = vec![hostile.into()];
        }
        let page = html(&records);
        assert!(!page.contains("<script") && !page.contains("\" onmouseover") && !page.contains("11111103"));
    }

    #[test]
    fn bare_runs_have_a_page() {
        let run = |name: &str| RunRecord { run: name.into(), ..RunRecord::default() };
        let page = html(&[run("a"), run("b")]);
        assert!(page.contains("nothing to compare"), "{page}");
    }
}
