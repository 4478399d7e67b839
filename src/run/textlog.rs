//! A logger's text file → named columns of numbers.
//! Method: the heading line is the first one that holds a time heading and at least one wanted value,
//! split by comma, semicolon or tab; what stands above it is preamble. The decimal mark is found over
//! the whole file: a comma inside a number means decimal commas, unless points follow it. Text is UTF-8 or UTF-16 with
//! a byte-order mark, else Latin-1. Every number that does not parse is an error with its line; nothing
//! is guessed. Own code in place of a CSV library, because preambles, decimal commas and line numbers
//! in messages are the job here. Limit: fields with line breaks inside quotes are not read.

use std::path::{Path, PathBuf};

use super::guess;

/// Lines in which a heading line is looked for (common practice: preambles are far shorter).
const HEADING_LINES: usize = 1000;

/// Largest log read, bytes: some ten million rows.
const MAX_BYTES: u64 = 1 << 30;

/// Separators tried, in order.
const SEPARATORS: [char; 3] = [',', ';', '\t'];

/// A log cannot be read.
#[derive(Debug, thiserror::Error, miette::Diagnostic)]
pub enum LogError {
    /// Reading failed.
    #[error("{path} cannot be read or written")]
    #[diagnostic(code(log::io), help("see that the log named in run.toml exists in the run folder and may be read"))]
    Io {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// The file is too large.
    #[error("{path}: {bytes} bytes are too many for a log (at most {MAX_BYTES})")]
    #[diagnostic(code(log::size), help("thin the log out, or cut it to the time of the run"))]
    Size {
        /// The file.
        path: PathBuf,
        /// Its size.
        bytes: u64,
    },
    /// No heading line was found.
    #[error("{path}: no line holds the headings {wanted}")]
    #[diagnostic(code(log::headings))]
    Headings {
        /// The file.
        path: PathBuf,
        /// What was looked for.
        wanted: String,
        /// What to type.
        #[help]
        help: String,
    },
    /// A field is no number.
    #[error("{path}, line {line}: `{text}` under `{heading}` is no number")]
    #[diagnostic(
        code(log::number),
        help(
            "correct the line, or leave the field empty where nothing was measured; dates stand in a column `time`, named by columns = {{ time = \"{heading}\" }}"
        )
    )]
    Number {
        /// The file.
        path: PathBuf,
        /// Line, from 1.
        line: usize,
        /// The column's heading.
        heading: String,
        /// The field.
        text: String,
    },
    /// A line has more fields than there are headings.
    #[error("{path}, line {line}: {got} fields under {want} headings")]
    #[diagnostic(
        code(log::fields),
        help("where the decimal mark is a comma, fields must be separated by semicolons or tabs, or stand in quotes")
    )]
    Fields {
        /// The file.
        path: PathBuf,
        /// Line, from 1.
        line: usize,
        /// Fields found.
        got: usize,
        /// Headings.
        want: usize,
    },
    /// A field is no date.
    #[error("{path}, line {line}: {source}")]
    #[diagnostic(
        code(log::date),
        help(
            "where day and month could be mistaken, nothing is guessed; columns that count seconds are named by columns = {{ time_s = \"…\" }}"
        )
    )]
    Date {
        /// The file.
        path: PathBuf,
        /// Line, from 1.
        line: usize,
        /// What is wrong.
        source: super::clock::ClockError,
    },
    /// The log holds dates but the frames have none.
    #[error("{path}: the log holds dates, but nothing dates the frames")]
    #[diagnostic(
        code(log::start),
        help("add the date and time of the first frame to [frames], say start = \"2026-03-05T10:00:00\"")
    )]
    NoStart {
        /// The file.
        path: PathBuf,
    },
    /// No row was found.
    #[error("{path}: no row below the headings in line {line}")]
    #[diagnostic(code(log::empty), help("record the log again, or drop it from run.toml"))]
    Empty {
        /// The file.
        path: PathBuf,
        /// Line of the headings.
        line: usize,
    },
}

/// A heading to look for.
#[derive(Debug, Clone)]
pub(super) struct Wanted {
    /// Our column name.
    pub(super) name: &'static str,
    /// The heading it has in the file.
    pub(super) heading: String,
}

/// How a log is written.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Layout {
    /// Line of the headings, from 1.
    pub heading_line: usize,
    /// The separator.
    pub separator: char,
    /// The decimal mark.
    pub decimal: char,
    /// Our column name and the heading in the file, for each column found.
    pub found: Vec<(&'static str, String)>,
}

/// Times as they stand in the file.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum TimeKind {
    /// Plain numbers.
    Seconds,
    /// Dates.
    Dates,
}

/// The columns of a log in file order, numbers as they stand there.
#[derive(Debug)]
pub(super) struct TextLog {
    pub(super) layout: Layout,
    pub(super) kind: TimeKind,
    /// Line of each row.
    pub(super) lines: Vec<usize>,
    /// Time of each row: a plain number, or Unix seconds.
    pub(super) times: Vec<f64>,
    /// Values of each row, in the order of `layout.found` without the time.
    pub(super) values: Vec<(&'static str, Vec<Option<f64>>)>,
    pub(super) warnings: Vec<String>,
}

/// Reads a log. `offset_s`: UTC offset of dates that have none.
pub(super) fn read(path: &Path, wanted: &[Wanted], offset_s: Option<i32>) -> Result<TextLog, LogError> {
    let text = read_text(path)?;
    parse(path, &text, wanted, offset_s)
}

/// The text of a file, whatever its encoding.
pub(super) fn read_text(path: &Path) -> Result<String, LogError> {
    let io = |source| LogError::Io { path: path.to_path_buf(), source };
    let facts = std::fs::metadata(path).map_err(io)?;
    if facts.is_dir() {
        return Err(io(std::io::Error::new(std::io::ErrorKind::IsADirectory, "is a folder")));
    }
    if facts.len() > MAX_BYTES {
        return Err(LogError::Size { path: path.to_path_buf(), bytes: facts.len() });
    }
    Ok(decode(std::fs::read(path).map_err(io)?))
}

fn decode(bytes: Vec<u8>) -> String {
    let wide = |join: fn([u8; 2]) -> u16| {
        let units: Vec<u16> = bytes[2..].chunks_exact(2).map(|pair| join([pair[0], pair[1]])).collect();
        String::from_utf16_lossy(&units)
    };
    match bytes.as_slice() {
        [0xff, 0xfe, ..] => wide(u16::from_le_bytes),
        [0xfe, 0xff, ..] => wide(u16::from_be_bytes),
        [0xef, 0xbb, 0xbf, rest @ ..] => String::from_utf8_lossy(rest).into_owned(),
        _ => String::from_utf8(bytes).unwrap_or_else(|error| error.into_bytes().into_iter().map(char::from).collect()),
    }
}

pub(super) fn parse(path: &Path, text: &str, wanted: &[Wanted], offset_s: Option<i32>) -> Result<TextLog, LogError> {
    let heading = find_heading(text, wanted).ok_or_else(|| no_heading(path, text, wanted))?;
    let decimal = decimal_mark(text, &heading);
    Rows { path, heading: &heading, decimal, offset_s }.read(text)
}

/// The heading line as found.
struct Heading {
    /// Index of the line, from 0.
    at: usize,
    separator: char,
    fields: usize,
    /// Our name, the heading, and its place among the fields.
    places: Vec<(&'static str, String, usize)>,
    kind: TimeKind,
    time: usize,
}

fn find_heading(text: &str, wanted: &[Wanted]) -> Option<Heading> {
    text.lines().take(HEADING_LINES).enumerate().find_map(|(at, line)| {
        let candidates = SEPARATORS.into_iter().filter_map(|separator| heading_of(at, line, separator, wanted));
        candidates.max_by_key(|heading| heading.places.len())
    })
}

fn heading_of(at: usize, line: &str, separator: char, wanted: &[Wanted]) -> Option<Heading> {
    let mut fields = Vec::new();
    split(line, separator, &mut fields);
    let place = |heading: &str| {
        let exact = fields.iter().position(|field| *field == heading.trim());
        exact.or_else(|| fields.iter().position(|field| field.to_lowercase() == heading.trim().to_lowercase()))
    };
    let found: Vec<_> = wanted
        .iter()
        .filter_map(|want| place(&want.heading).map(|at| (want.name, fields[at].to_owned(), at)))
        .collect();
    let time_of = |name: &str| found.iter().find(|column| column.0 == name).map(|column| column.2);
    let (kind, time) = time_of("time_s")
        .map(|at| (TimeKind::Seconds, at))
        .or_else(|| time_of("time").map(|at| (TimeKind::Dates, at)))?;
    let values = found.iter().filter(|column| !matches!(column.0, "time_s" | "time")).count();
    (values > 0).then_some(Heading { at, separator, fields: fields.len(), places: found, kind, time })
}

fn no_heading(path: &Path, text: &str, wanted: &[Wanted]) -> LogError {
    let names: Vec<_> = wanted.iter().map(|want| format!("`{}`", want.heading)).collect();
    let help = match guess::heading_line(text) {
        None => "the log must have a line of headings, a time and at least one value".to_owned(),
        Some(headings) => {
            let pairs: Vec<_> = wanted
                .iter()
                .filter_map(|want| {
                    guess::heading_for(want.name, &headings).map(|found| format!("{} = \"{found}\"", want.name))
                })
                .collect();
            let pairs = if pairs.is_empty() { format!("{} = \"…\"", wanted[0].name) } else { pairs.join(", ") };
            format!("the file's headings seem to be {}; say which is which: columns = {{ {pairs} }}", quoted(&headings))
        }
    };
    LogError::Headings { path: path.to_path_buf(), wanted: names.join(", "), help }
}

fn quoted(names: &[String]) -> String {
    names.iter().map(|name| format!("`{name}`")).collect::<Vec<_>>().join(", ")
}

/// Splits a line; quotes around a field protect separators in it and are taken off.
pub(super) fn split<'a>(line: &'a str, separator: char, fields: &mut Vec<&'a str>) {
    fields.clear();
    let (mut start, mut inside) = (0, false);
    for (at, letter) in line.char_indices() {
        if letter == '"' {
            inside = !inside;
        } else if letter == separator && !inside {
            fields.push(bare(&line[start..at]));
            start = at + letter.len_utf8();
        }
    }
    fields.push(bare(&line[start..]));
}

/// A field without blanks, NULs and quotes around it.
fn bare(field: &str) -> &str {
    let blank = |letter: char| letter.is_whitespace() || letter == '\0' || letter == '\u{feff}';
    let field = field.trim_matches(blank);
    let inner = field.strip_prefix('"').and_then(|field| field.strip_suffix('"'));
    inner.map_or(field, |inner| inner.trim_matches(blank))
}

/// The decimal mark of the wanted numbers: a comma where one stands in a number with no point after it.
fn decimal_mark(text: &str, heading: &Heading) -> char {
    let numbers: Vec<usize> =
        heading.places.iter().filter(|column| column.0 != "time").map(|column| column.2).collect();
    let mut fields = Vec::new();
    for line in text.lines().skip(heading.at + 1) {
        split(line, heading.separator, &mut fields);
        for field in numbers.iter().filter_map(|at| fields.get(*at)) {
            if let Some(comma) = field.rfind(',') {
                return if field[comma..].contains('.') { '.' } else { ',' };
            }
        }
    }
    '.'
}

/// A field as a number: `Ok(None)` where it says that nothing was measured.
fn number(field: &str, decimal: char) -> Result<Option<f64>, ()> {
    if matches!(field.to_ascii_lowercase().as_str(), "" | "-" | "--" | "nan" | "na" | "n/a" | "null" | "none") {
        return Ok(None);
    }
    let thousands = if decimal == ',' { '.' } else { ',' };
    let plain = match (field.rfind(thousands), field.find(decimal)) {
        (Some(group), Some(mark)) if group < mark => field.replace(thousands, ""),
        (Some(_), _) => return Err(()),
        (None, _) => field.to_owned(),
    };
    let value: f64 = plain.replacen(decimal, ".", 1).parse().map_err(|_| ())?;
    if value.is_finite() { Ok(Some(value)) } else { Err(()) }
}

struct Rows<'a> {
    path: &'a Path,
    heading: &'a Heading,
    decimal: char,
    offset_s: Option<i32>,
}

impl Rows<'_> {
    fn read(&self, text: &str) -> Result<TextLog, LogError> {
        let heading = self.heading;
        let value_places: Vec<_> =
            heading.places.iter().filter(|column| !matches!(column.0, "time_s" | "time")).collect();
        let mut log = TextLog {
            layout: Layout {
                heading_line: heading.at + 1,
                separator: heading.separator,
                decimal: self.decimal,
                found: heading.places.iter().map(|column| (column.0, column.1.clone())).collect(),
            },
            kind: heading.kind,
            lines: Vec::new(),
            times: Vec::new(),
            values: value_places.iter().map(|column| (column.0, Vec::new())).collect(),
            warnings: Vec::new(),
        };
        let whole = text.ends_with('\n');
        let mut lines = text.lines().enumerate().skip(heading.at + 1).peekable();
        let mut fields = Vec::new();
        while let Some((at, line)) = lines.next() {
            let number = at + 1;
            split(line, heading.separator, &mut fields);
            if fields.iter().all(|field| field.is_empty()) {
                continue;
            }
            if log.lines.is_empty() && at == heading.at + 1 && self.is_units(&fields) {
                continue;
            }
            let last = lines.peek().is_none() && !whole;
            if last && fields.len() < heading.fields {
                log.warnings
                    .push(format!("{}, line {number}: the last line is cut off and was left out", self.path.display()));
                continue;
            }
            if fields.len() > heading.fields && fields[heading.fields..].iter().any(|field| !field.is_empty()) {
                return Err(LogError::Fields {
                    path: self.path.to_path_buf(),
                    line: number,
                    got: fields.len(),
                    want: heading.fields,
                });
            }
            let time = self.time(number, fields.get(heading.time).copied().unwrap_or(""))?;
            log.lines.push(number);
            log.times.push(time);
            for (column, (_, values)) in value_places.iter().zip(&mut log.values) {
                values.push(self.value(number, column, fields.get(column.2).copied().unwrap_or(""))?);
            }
        }
        if log.lines.is_empty() {
            return Err(LogError::Empty { path: self.path.to_path_buf(), line: heading.at + 1 });
        }
        Ok(log)
    }

    /// Whether the line under the headings names units: none of the wanted fields starts like a number.
    fn is_units(&self, fields: &[&str]) -> bool {
        let starts_like_number =
            |field: &&str| field.starts_with(|letter: char| letter.is_ascii_digit() || "+-.".contains(letter));
        let mut wanted = self.heading.places.iter().filter_map(|column| fields.get(column.2));
        wanted.all(|field| !field.is_empty() && !starts_like_number(field))
    }

    fn time(&self, line: usize, field: &str) -> Result<f64, LogError> {
        match self.heading.kind {
            TimeKind::Dates => super::clock::parse_stamp(field, self.offset_s).map_err(|source| LogError::Date {
                path: self.path.to_path_buf(),
                line,
                source,
            }),
            TimeKind::Seconds => {
                let heading = self.heading.places.iter().find(|column| column.0 == "time_s");
                let heading = heading.map_or("time_s", |column| column.1.as_str());
                number(field, self.decimal).ok().flatten().ok_or_else(|| self.no_number(line, heading, field))
            }
        }
    }

    fn value(&self, line: usize, column: &(&'static str, String, usize), field: &str) -> Result<Option<f64>, LogError> {
        number(field, self.decimal).map_err(|()| self.no_number(line, &column.1, field))
    }

    fn no_number(&self, line: usize, heading: &str, field: &str) -> LogError {
        /// Letters of a bad field that are shown.
        const SHOWN: usize = 60;
        let text = field.chars().take(SHOWN).filter(|letter| !letter.is_control()).collect();
        LogError::Number { path: self.path.to_path_buf(), line, heading: heading.to_owned(), text }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn wanted() -> Vec<Wanted> {
        ["time_s", "time", "force_n", "direction_deg"].map(|name| Wanted { name, heading: name.to_owned() }).to_vec()
    }

    fn read_str(text: &str) -> Result<TextLog, LogError> {
        parse(Path::new("load.csv"), text, &wanted(), None)
    }

    #[test]
    fn plain() {
        let log = read_str("time_s,force_n\n0,1.5\n10,\n20,2e0\n").unwrap();
        assert_eq!(log.times, [0.0, 10.0, 20.0]);
        assert_eq!(log.values[0], ("force_n", vec![Some(1.5), None, Some(2.0)]));
        assert_eq!(log.lines, [2, 3, 4]);
    }

    #[test]
    fn preamble_semicolons_decimal_commas_units_and_crlf() {
        let text = "Gerät 7; geprüft\r\n\r\nNr;time_s;\"force_n\"\r\n;s;N\r\n1;0,5;1.234,5\r\n2;1,5;-0,25\r\n";
        let log = read_str(text).unwrap();
        assert_eq!((log.layout.heading_line, log.layout.separator, log.layout.decimal), (3, ';', ','));
        assert_eq!(log.times, [0.5, 1.5]);
        assert_eq!(log.values[0].1, [Some(1234.5), Some(-0.25)]);
        assert_eq!(log.lines, [5, 6]);
    }

    #[test]
    fn encodings() {
        let text = "time_s\tforce_n\n0\t1\n";
        let utf16: Vec<u8> = [0xff, 0xfe].into_iter().chain(text.encode_utf16().flat_map(u16::to_le_bytes)).collect();
        assert_eq!(decode(utf16), text);
        assert_eq!(decode([b"\xef\xbb\xbf", text.as_bytes()].concat()), text);
        assert_eq!(decode(b"T \xb0C".to_vec()), "T °C");
    }

    #[test]
    fn quoted_decimal_commas_and_thousands() {
        let log = read_str("time_s,force_n\n\"0,5\",\"1,25\"\n").unwrap();
        assert_eq!((log.times[0], log.values[0].1[0]), (0.5, Some(1.25)));
        let log = read_str("time_s;force_n\n0;1,234.5\n").unwrap();
        assert_eq!(log.values[0].1[0], Some(1234.5));
    }

    #[test]
    fn what_is_no_number_names_its_line() {
        let error = read_str("time_s,force_n\n0,1\n1,OVL\n").unwrap_err();
        assert!(error.to_string().contains("line 3: `OVL` under `force_n`"), "{error}");
        assert!(matches!(read_str("time_s,force_n\n0,inf\n"), Err(LogError::Number { line: 2, .. })));
        assert!(matches!(read_str("time_s,force_n\n0,1,5\n"), Err(LogError::Fields { line: 2, got: 3, want: 2, .. })));
        assert!(matches!(read_str("time_s,force_n\n,1\n"), Err(LogError::Number { line: 2, .. })));
        assert!(matches!(read_str("time_s,force_n\n\n"), Err(LogError::Empty { .. })));
        assert!(matches!(read_str("time,force_n\n0,1\n"), Err(LogError::Date { line: 2, .. })));
        // A point in a file of decimal commas could be either mark.
        assert!(matches!(read_str("time_s;force_n\n0,5;1\n1.5;1\n"), Err(LogError::Number { line: 3, .. })));
    }

    #[test]
    fn a_cut_last_line_and_nuls_are_left_out() {
        let log = read_str("time_s,force_n,direction_deg\n0,1,90\n1,1.").unwrap();
        assert_eq!((log.times.len(), log.warnings.len()), (1, 1));
        let log = read_str("time_s,force_n\n0,1\n\0\0\0\0\n").unwrap();
        assert_eq!(log.times.len(), 1);
    }

    #[test]
    fn missing_headings_are_proposed() {
        let error = read_str("Zeit (min);Kraft [kN]\n0;1\n").unwrap_err();
        let LogError::Headings { help, .. } = &error else { panic!("{error}") };
        assert!(help.contains("time_s = \"Zeit (min)\"") && help.contains("force_n = \"Kraft [kN]\""), "{help}");
    }

    proptest::proptest! {
        #[test]
        fn any_text_ends_in_a_log_or_a_message(text in "(time_s[,;\t]force_n\n)?[\\PC\n\t\"]{0,200}") {
            match read_str(&text) {
                Ok(log) => proptest::prop_assert!(log.times.iter().all(|time| time.is_finite())),
                Err(error) => proptest::prop_assert!(!error.to_string().is_empty()),
            }
        }
    }
}
