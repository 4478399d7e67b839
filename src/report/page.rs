//! `report.html`: one file that opens offline, with the verdict in words first and the evidence after it.
//! The template escapes every value; what it takes unescaped is made here from numbers and escaped text.
//! A content policy in the page forbids it to load anything.

use minijinja::Environment;
use minijinja::value::Serde;
use serde::Serialize;

use super::Error;
use super::figures::{FIGURES, Figure, Format};
use super::palette::{Ink, THEMED};
use super::schema::{FILAMENTS, FORECASTS};
use super::svg;
use super::verdict::{SAFETY, Verdict};
use super::words::bind;
use crate::results::Results;

mod effects;
mod grid;
mod lists;
mod player;
mod record;
mod review;
mod strip;
mod traces;

/// What the page may show: nothing but what it holds, or pictures from its own folder as well.
const ALONE: &str = "img-src data:";
const BESIDE: &str = "img-src data: 'self' file:";

/// Name of the template; the ending switches escaping on.
const TEMPLATE: &str = "page.html";

#[derive(Serialize)]
struct Page<'a> {
    colours: String,
    css: &'static str,
    script: String,
    policy: &'static str,
    name: &'a str,
    specimen: Option<&'a str>,
    note: Option<&'a str>,
    facts: Vec<[String; 2]>,
    strip: Option<strip::Strip>,
    verdict: [[String; 2]; 4],
    warnings: &'a [String],
    cautions: Vec<&'a str>,
    player: Option<player::Player>,
    record: record::Record,
    review: Option<review::Shown>,
    figures: Vec<Shown>,
    not_drawn: String,
    load: effects::LoadPart,
    charge: effects::ChargePart,
    tables: Vec<grid::Grid>,
    set_aside: Vec<[String; 2]>,
    settings: Vec<[String; 2]>,
    inputs: Vec<[&'a str; 2]>,
    made_by: String,
}

/// A figure in both layouts.
#[derive(Serialize)]
struct Shown {
    name: &'static str,
    title: &'static str,
    caption: &'static str,
    numbers: Vec<[String; 2]>,
    wide: String,
    narrow: String,
}

/// The scripts, in the order in which they run.
const SCRIPTS: [&str; 6] = [
    include_str!("page/script/bench.js"),
    include_str!("page/script/picture.js"),
    include_str!("page/script/view.js"),
    include_str!("page/script/scales.js"),
    include_str!("page/script/plots.js"),
    include_str!("page/script/marks.js"),
];

/// The page as HTML. `beside`: the folder next to the page that holds every usable frame, where there is one.
///
/// # Errors
/// [`Error::Made`] when a figure or the template fails.
pub fn render(results: &Results, beside: Option<&str>) -> Result<String, Error> {
    let page = page(results, beside)?;
    let mut environment = Environment::new();
    environment
        .add_template(TEMPLATE, include_str!("page.html"))
        .and_then(|()| environment.get_template(TEMPLATE)?.render(Serde(&page)))
        .map_err(|why| Error::made("report.html", why))
}

fn page<'a>(results: &'a Results, beside: Option<&str>) -> Result<Page<'a>, Error> {
    let verdict = Verdict::of(results);
    let summary = &results.summary;
    let (figures, not_drawn) = evidence(results)?;
    Ok(Page {
        colours: colours(),
        css: include_str!("page.css"),
        script: SCRIPTS.concat(),
        policy: if beside.is_some() { BESIDE } else { ALONE },
        name: &results.facts.run,
        specimen: results.facts.specimen.as_deref(),
        note: results.facts.note.as_deref(),
        facts: lists::facts(results),
        strip: strip::of(results),
        verdict: [
            ["Growth".into(), bind(&verdict.growth)],
            ["Direction".into(), bind(&verdict.direction)],
            ["Load".into(), bind(&verdict.load)],
            ["Forecast".into(), bind(&verdict.forecast)],
        ],
        warnings: &summary.warnings,
        cautions: std::iter::once(SAFETY).chain(results.cautions.iter().map(String::as_str)).collect(),
        player: player::of(results, beside)?,
        record: record::of(results),
        review: review::of(results),
        figures,
        not_drawn,
        load: effects::load(results)?,
        charge: effects::charge(results)?,
        tables: vec![
            grid::of("Filaments", &FILAMENTS, &results.filaments),
            grid::of("Forecasts as issued", &FORECASTS, &results.forecasts),
        ],
        set_aside: lists::set_aside(summary),
        settings: lists::flat(&summary.settings),
        inputs: summary.inputs.iter().map(|(path, hash)| [path.as_str(), hash.as_str()]).collect(),
        made_by: format!("{} {}", summary.tool, summary.version),
    })
}

/// The themed colours as CSS variables, light then dark, and the classes of the figures that use them.
pub(super) fn colours() -> String {
    let light: String = THEMED.iter().map(|(ink, name)| format!("--{name}:{};", ink.light().hex())).collect();
    let dark: String = THEMED.iter().map(|(ink, name)| format!("--{name}:{};", ink.dark().hex())).collect();
    let classes: String = THEMED
        .iter()
        .map(|(_, name)| format!(".s-{name}{{stroke:var(--{name})}}.f-{name}{{fill:var(--{name})}}"))
        .collect();
    let ramp: Vec<String> = (0..=12).map(|i| super::palette::arrival(f64::from(i) / 12.0).hex()).collect();
    format!(
        ":root{{{light}--casing:{};--load-mark:{};--ramp:linear-gradient(to right,{})}}@media screen and (prefers-color-scheme:dark){{:root{{{dark}}}}}{classes}{}",
        Ink::Black.light().hex(),
        Ink::LoadMark.light().hex(),
        ramp.join(","),
        traces::colours()
    )
}

/// The figure in both layouts; `None` where there is nothing to show.
fn shown(figure: &Figure, results: &Results) -> Result<Option<Shown>, Error> {
    let draw = |format| (figure.draw)(results, format).map(|drawing| svg::write(&drawing, 0.0)).transpose();
    let (Some(wide), Some(narrow)) = (draw(Format::Wide)?, draw(Format::Narrow)?) else {
        return Ok(None);
    };
    let numbers = lists::numbers(figure.name, results);
    Ok(Some(Shown { name: figure.name, title: figure.title, caption: figure.caption, numbers, wide, narrow }))
}

/// Figures that stand elsewhere on the page than under the evidence.
const ELSEWHERE: [&str; 5] = ["overlay", "steering", "kink", "speed", "charge"];

/// The figures of the evidence: those drawn, and the titles of those with nothing to show.
fn evidence(results: &Results) -> Result<(Vec<Shown>, String), Error> {
    drawn(results, |name| !ELSEWHERE.contains(&name))
}

/// The figures that `keep` names: those drawn, and the titles of those with nothing to show.
fn drawn(results: &Results, keep: impl Fn(&str) -> bool) -> Result<(Vec<Shown>, String), Error> {
    let (mut drawn, mut missing) = (Vec::new(), Vec::new());
    for figure in FIGURES.iter().filter(|figure| keep(figure.name)) {
        match shown(figure, results)? {
            Some(shown) => drawn.push(shown),
            None => missing.push(figure.title.to_lowercase()),
        }
    }
    Ok((drawn, missing.join(", ")))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::example;

    #[test]
    fn the_page_loads_nothing() {
        let html = render(&example::growing(), None).unwrap();
        for forbidden in [
            "src=\"http",
            "href=\"http",
            "@import",
            "url(http",
            "url(\"http",
            "src=\"//",
            "href=\"//",
            "<link",
            "fetch(",
            "XMLHttpRequest",
            "<iframe",
        ] {
            assert!(!html.contains(forbidden), "{forbidden}");
        }
        assert!(html.contains("default-src 'none'"));
        let addresses = html.matches("http://").count() + html.matches("https://").count();
        assert_eq!(addresses, html.matches("http://www.w3.org/2000/svg").count());
    }

    #[test]
    fn hostile_names_are_inert() {
        let mut results = example::growing();
        let hostile = "</script><script>alert('x')</script>\"' onmouseover=\"alert(1)\" \u{202e}{{ 1234567*9 }}";
        results.facts.run = hostile.into();
        results.facts.specimen = Some(hostile.into());
        results.facts.note = Some(hostile.into());
        results.summary.warnings = vec![hostile.into()];
        results.cautions = vec![hostile.into()];
        results.summary.inputs.insert(hostile.into(), hostile.into());
        results.summary.settings = serde_json::json!({ hostile: hostile });
        results.summary.frames.set_aside[0].reason = hostile.into();
        results.forecasts[0].model = hostile.into();
        results.frames.iter_mut().for_each(|row| row.file = hostile.into());
        let plain = render(&example::growing(), None).unwrap();
        let html = render(&results, None).unwrap();
        assert_eq!(html.matches("<script").count(), plain.matches("<script").count());
        assert_eq!(html.matches("</script").count(), plain.matches("</script").count());
        assert!(!html.contains("\" onmouseover"));
        assert!(!html.contains("11111103"), "the template ran the name");
    }

    #[test]
    fn a_run_with_nothing_in_it_still_has_a_page() {
        for results in [Results::default(), example::still()] {
            let html = render(&results, None).unwrap();
            assert!(html.contains("A cell on test can vent"));
        }
    }

    /// `EXAMPLE_DIR=/tmp/x cargo test --release --lib page:: -- --ignored` writes the examples for looking at.
    #[test]
    fn write_examples() {
        // Only where a folder is named to look at them.
        let Some(home) = std::env::var_os("EXAMPLE_DIR").map(std::path::PathBuf::from) else { return };
        for (name, results) in [
            ("growing", example::growing()),
            ("shorted", example::shorted()),
            ("still", example::still()),
            ("empty", Results::default()),
        ] {
            crate::report::write(&results, &home.join(name), crate::report::Save::default()).unwrap();
        }
    }
}
