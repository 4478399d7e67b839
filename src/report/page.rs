//! `report.html`: one file that opens offline, with the verdict in words first and the evidence after it.
//! The template escapes every value; what it takes unescaped is made here from numbers and escaped text.
//! A content policy in the page forbids it to load anything.

use minijinja::Environment;
use minijinja::value::Serde;
use serde::Serialize;

use super::Error;
use super::figures::{FIGURES, Figure, Format};
use super::palette::THEMED;
use super::schema::{FILAMENTS, FORECASTS};
use super::svg;
use super::verdict::{SAFETY, Verdict};
use super::words::{bind, counted, duration, figures as digits, sentence, trimmed};
use crate::results::{Results, Summary};

mod grid;
mod player;
mod strip;

/// Name of the template; the ending switches escaping on.
const TEMPLATE: &str = "page.html";

#[derive(Serialize)]
struct Page<'a> {
    colours: String,
    css: &'static str,
    script: &'static str,
    name: &'a str,
    specimen: Option<&'a str>,
    note: Option<&'a str>,
    facts: Vec<[String; 2]>,
    strip: Option<strip::Strip>,
    verdict: [[String; 2]; 3],
    warnings: &'a [String],
    cautions: Vec<&'a str>,
    player: Option<player::Player>,
    figures: Vec<Shown>,
    not_drawn: String,
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
    wide: String,
    narrow: String,
}

/// The page as HTML.
///
/// # Errors
/// [`Error::Made`] when a figure or the template fails.
pub fn render(results: &Results) -> Result<String, Error> {
    let page = page(results)?;
    let mut environment = Environment::new();
    environment
        .add_template(TEMPLATE, include_str!("page.html"))
        .and_then(|()| environment.get_template(TEMPLATE)?.render(Serde(&page)))
        .map_err(|why| Error::made("report.html", why))
}

fn page(results: &Results) -> Result<Page<'_>, Error> {
    let verdict = Verdict::of(results);
    let summary = &results.summary;
    let (figures, not_drawn) = evidence(results)?;
    Ok(Page {
        colours: colours(),
        css: include_str!("page.css"),
        script: include_str!("page.js"),
        name: &results.facts.run,
        specimen: results.facts.specimen.as_deref(),
        note: results.facts.note.as_deref(),
        facts: facts(results),
        strip: strip::of(results),
        verdict: [
            ["Growth".into(), bind(&verdict.growth)],
            ["Direction".into(), bind(&verdict.direction)],
            ["Forecast".into(), bind(&verdict.forecast)],
        ],
        warnings: &summary.warnings,
        cautions: std::iter::once(SAFETY)
            .chain(results.cautions.iter().map(String::as_str))
            .collect(),
        player: player::of(results)?,
        figures,
        not_drawn,
        tables: vec![
            grid::of("Filaments", &FILAMENTS, &results.filaments),
            grid::of("Forecasts as issued", &FORECASTS, &results.forecasts),
        ],
        set_aside: set_aside(summary),
        settings: flat(&summary.settings),
        inputs: summary
            .inputs
            .iter()
            .map(|(path, hash)| [path.as_str(), hash.as_str()])
            .collect(),
        made_by: format!("{} {}", summary.tool, summary.version),
    })
}

/// The themed colours as CSS variables, light then dark, and the classes of the figures that use them.
fn colours() -> String {
    let light: String = THEMED
        .iter()
        .map(|(ink, name)| format!("--{name}:{};", ink.light().hex()))
        .collect();
    let dark: String = THEMED
        .iter()
        .map(|(ink, name)| format!("--{name}:{};", ink.dark().hex()))
        .collect();
    let classes: String = THEMED
        .iter()
        .map(|(_, name)| {
            format!(".s-{name}{{stroke:var(--{name})}}.f-{name}{{fill:var(--{name})}}")
        })
        .collect();
    let ramp: Vec<String> = (0..=12)
        .map(|i| super::palette::arrival(f64::from(i) / 12.0).hex())
        .collect();
    format!(
        ":root{{{light}--ramp:linear-gradient(to right,{})}}@media screen and (prefers-color-scheme:dark){{:root{{{dark}}}}}{classes}",
        ramp.join(",")
    )
}

/// The figure in both layouts; `None` where there is nothing to show.
fn shown(figure: &Figure, results: &Results) -> Result<Option<Shown>, Error> {
    let draw = |format| {
        (figure.draw)(results, format)
            .map(|drawing| svg::write(&drawing, 0.0))
            .transpose()
    };
    let (Some(wide), Some(narrow)) = (draw(Format::Wide)?, draw(Format::Narrow)?) else {
        return Ok(None);
    };
    Ok(Some(Shown {
        name: figure.name,
        title: figure.title,
        caption: figure.caption,
        wide,
        narrow,
    }))
}

/// The figures of the evidence: those drawn, and the titles of those with nothing to show.
fn evidence(results: &Results) -> Result<(Vec<Shown>, String), Error> {
    let (mut drawn, mut missing) = (Vec::new(), Vec::new());
    for figure in FIGURES.iter().filter(|figure| figure.name != "overlay") {
        match shown(figure, results)? {
            Some(shown) => drawn.push(shown),
            None => missing.push(figure.title.to_lowercase()),
        }
    }
    Ok((drawn, missing.join(", ")))
}

fn facts(results: &Results) -> Vec<[String; 2]> {
    let (facts, summary) = (&results.facts, &results.summary);
    let last = results
        .frames
        .iter()
        .map(|row| row.time_s)
        .fold(0.0, f64::max);
    let [w, h] = facts.frame_size;
    let mut list = vec![
        [
            "Frames".to_owned(),
            format!("{} of {} used", summary.frames.usable, summary.frames.total),
        ],
        ["Run time".to_owned(), duration(last)],
        [
            "Picture".to_owned(),
            format!("{w} × {h} px, {} µm/px", trimmed(facts.um_per_px, 4)),
        ],
    ];
    if let Some(gap) = facts.gap_um {
        list.push(["Gap".to_owned(), format!("{} µm", trimmed(gap, 4))]);
    }
    let load = match (&facts.fixture, summary.load.stress_mpa) {
        (fixture, Some(s)) if (s.max - s.min).abs() > 0.05 => {
            let range = format!("{} to {} MPa", digits(s.min, 3), digits(s.max, 3));
            fixture
                .as_ref()
                .map_or(range.clone(), |name| format!("{name}, {range}"))
        }
        (fixture, Some(s)) => {
            let stress = format!("{} MPa", digits(s.median, 3));
            fixture
                .as_ref()
                .map_or(stress.clone(), |name| format!("{name}, {stress}"))
        }
        (Some(fixture), None) => fixture.clone(),
        (None, None) => "none logged".to_owned(),
    };
    list.push(["Load".to_owned(), load]);
    list
}

/// Frames set aside, gathered by reason: "blank" → "3 frames: 4, 9, 17".
fn set_aside(summary: &Summary) -> Vec<[String; 2]> {
    /// Numbers that are spelled out; the table of frames has them all.
    const SPELLED: usize = 40;
    let mut by_reason: Vec<(&str, Vec<usize>)> = Vec::new();
    for frame in &summary.frames.set_aside {
        match by_reason
            .iter_mut()
            .find(|(reason, _)| *reason == frame.reason)
        {
            Some((_, frames)) => frames.push(frame.frame),
            None => by_reason.push((&frame.reason, vec![frame.frame])),
        }
    }
    let spell = |(reason, frames): (&str, Vec<usize>)| {
        let mut numbers: Vec<String> = frames.iter().take(SPELLED).map(usize::to_string).collect();
        if frames.len() > SPELLED {
            numbers.push("…".into());
        }
        [
            reason.to_owned(),
            format!(
                "{}: {}",
                sentence(&counted(frames.len(), "frame", "frames")),
                numbers.join(", ")
            ),
        ]
    };
    by_reason.into_iter().map(spell).collect()
}

/// Nested settings as `a.b` and value, in order.
fn flat(settings: &serde_json::Value) -> Vec<[String; 2]> {
    fn walk(prefix: &str, value: &serde_json::Value, out: &mut Vec<[String; 2]>) {
        match value {
            serde_json::Value::Object(map) => {
                for (key, value) in map {
                    let dot = if prefix.is_empty() { "" } else { "." };
                    walk(&format!("{prefix}{dot}{key}"), value, out);
                }
            }
            serde_json::Value::Null if prefix.is_empty() => {}
            serde_json::Value::String(text) => out.push([prefix.to_owned(), text.clone()]),
            other => out.push([prefix.to_owned(), other.to_string()]),
        }
    }
    let mut out = Vec::new();
    walk("", settings, &mut out);
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::example;

    #[test]
    fn the_page_loads_nothing() {
        let html = render(&example::growing()).unwrap();
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
        assert_eq!(
            addresses,
            html.matches("xmlns=\"http://www.w3.org/2000/svg\"").count()
        );
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
        results
            .summary
            .inputs
            .insert(hostile.into(), hostile.into());
        results.summary.settings = serde_json::json!({ hostile: hostile });
        results.summary.frames.set_aside[0].reason = hostile.into();
        results.forecasts[0].model = hostile.into();
        results
            .frames
            .iter_mut()
            .for_each(|row| row.file = hostile.into());
        let plain = render(&example::growing()).unwrap();
        let html = render(&results).unwrap();
        assert_eq!(
            html.matches("<script").count(),
            plain.matches("<script").count()
        );
        assert_eq!(
            html.matches("</script").count(),
            plain.matches("</script").count()
        );
        assert!(!html.contains("\" onmouseover"));
        assert!(!html.contains("11111103"), "the template ran the name");
    }

    #[test]
    fn a_run_with_nothing_in_it_still_has_a_page() {
        for results in [Results::default(), example::still()] {
            let html = render(&results).unwrap();
            assert!(html.contains("A cell on test can vent"));
        }
    }

    /// `EXAMPLE_DIR=/tmp/x cargo test --release --lib page:: -- --ignored` writes the examples for looking at.
    #[test]
    #[ignore = "writes whole output folders to the folder named in EXAMPLE_DIR"]
    fn write_examples() {
        let home = std::path::PathBuf::from(std::env::var("EXAMPLE_DIR").unwrap());
        for (name, results) in [
            ("growing", example::growing()),
            ("shorted", example::shorted()),
            ("still", example::still()),
            ("empty", Results::default()),
        ] {
            crate::report::write(&results, &home.join(name), crate::report::Save::default())
                .unwrap();
        }
    }
}
