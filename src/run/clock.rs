//! The clock that frames and logs share: what "time 0" of the tables is on it, and dates joined to it.
//! All times are seconds in `f64`; dates are Unix seconds in UTC. Source of the date grammar: ISO 8601
//! and RFC 3339 (through `jiff`), and day-first dates with dots. Limit: `03/05/2026` is refused, since
//! nothing tells day from month.

use jiff::Timestamp;
use jiff::civil::DateTime;
use jiff::tz::Offset;

/// Where the first frame lies.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Clock {
    /// Reading of the shared clock (in plain seconds) at the first frame.
    pub zero_s: f64,
    /// Date of the first frame, Unix seconds, where known.
    pub start_unix_s: Option<f64>,
    /// UTC offset of the frames' stamps, seconds, where given.
    pub utc_offset_s: Option<i32>,
}

/// A date could not be understood.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`{0}` is no date and time; write it as 2026-03-05T10:00:00")]
pub struct ClockError(pub String);

/// Seconds east of UTC: `+01:00`, `-0330`, `+1`, `Z`.
///
/// ```
/// use veerlog::run::parse_offset;
/// assert_eq!(parse_offset("+01:00"), Some(3600));
/// assert_eq!(parse_offset("-03:30"), Some(-12600));
/// assert_eq!(parse_offset("MEZ"), None);
/// ```
#[must_use]
pub fn parse_offset(text: &str) -> Option<i32> {
    let text = text.trim();
    if text == "Z" {
        return Some(0);
    }
    let (sign, rest) = match text.split_at_checked(1)? {
        ("+", rest) => (1, rest),
        ("-", rest) => (-1, rest),
        _ => return None,
    };
    let (hours, minutes) = match rest.split_once(':') {
        Some(parts) => parts,
        None if rest.len() == 4 => rest.split_at_checked(2)?,
        None => (rest, "0"),
    };
    let digits = |text: &str| {
        (!text.is_empty() && text.bytes().all(|byte| byte.is_ascii_digit())).then(|| text.parse::<i32>().ok())?
    };
    let (hours, minutes) = (digits(hours)?, digits(minutes)?);
    (hours <= 14 && minutes < 60).then_some(sign * (hours * 3600 + minutes * 60))
}

/// A date and time to Unix seconds. A stamp without its own offset takes `offset_s`, else UTC.
///
/// # Errors
/// [`ClockError`] holds the text that is no date.
///
/// ```
/// use veerlog::run::parse_stamp;
/// assert_eq!(parse_stamp("1970-01-01T01:00:30+01:00", None), Ok(30.0));
/// assert_eq!(parse_stamp("01.01.1970 00:00:30,25", None), Ok(30.25));
/// assert!(parse_stamp("03/05/2026 10:00", None).is_err());
/// ```
pub fn parse_stamp(text: &str, offset_s: Option<i32>) -> Result<f64, ClockError> {
    let plain = rearranged(text.trim());
    let failed = || ClockError(text.trim().to_owned());
    if let Ok(stamp) = plain.parse::<Timestamp>() {
        return Ok(unix_seconds(stamp));
    }
    let civil: DateTime = plain.parse().map_err(|_| failed())?;
    let offset = Offset::from_seconds(offset_s.unwrap_or(0)).map_err(|_| failed())?;
    Ok(unix_seconds(offset.to_timestamp(civil).map_err(|_| failed())?))
}

/// Whole seconds and nanoseconds added in `f64`: exact to a microsecond for centuries.
fn unix_seconds(stamp: Timestamp) -> f64 {
    #[expect(clippy::cast_precision_loss, reason = "seconds since 1970 are far below 2^53")]
    let seconds = stamp.as_second() as f64;
    seconds + f64::from(stamp.subsec_nanosecond()) * 1e-9
}

/// Turns `05.03.2026 10:00` and `2026/03/05 10:00` into the standard's order.
fn rearranged(text: &str) -> String {
    let text = text.replace(',', ".");
    let (date, time) = text.split_once([' ', 'T']).unwrap_or((&text, "00:00"));
    let parts: Vec<&str> = date.split(['.', '/']).collect();
    let date = match parts.as_slice() {
        [day, month, year] if date.contains('.') && year.len() == 4 => {
            format!("{year}-{month:0>2}-{day:0>2}")
        }
        [year, month, day] if date.contains('/') && year.len() == 4 => {
            format!("{year}-{month:0>2}-{day:0>2}")
        }
        _ => date.to_owned(),
    };
    let time = time.trim();
    let time =
        if time.split(':').next().is_some_and(|hour| hour.len() == 1) { format!("0{time}") } else { time.to_owned() };
    format!("{date}T{time}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn one_moment_in_many_spellings() {
        let moment = parse_stamp("2026-03-05T10:00:00Z", None);
        for (text, offset) in [
            ("2026-03-05 11:00:00", Some(3600)),
            ("2026-03-05T11:00:00+01:00", Some(-7200)),
            ("2026/03/05 10:00", None),
            ("05.03.2026 10:00:00", None),
            ("5.3.2026 10:00:00", None),
            ("2026-03-05 10:00:00.000", None),
        ] {
            assert_eq!(parse_stamp(text, offset), moment, "{text}");
        }
    }

    #[test]
    fn summer_time_is_no_jump_when_stamps_carry_their_offset() {
        let before = parse_stamp("2026-03-29T01:59:50+01:00", None).unwrap();
        let after = parse_stamp("2026-03-29T03:00:10+02:00", None).unwrap();
        assert!((after - before - 20.0).abs() < 1e-9);
    }

    #[test]
    fn what_is_no_date_is_said() {
        for bad in ["", "yesterday", "2026-13-01T00:00:00", "12", "2026-03-05T25:00:00"] {
            assert!(parse_stamp(bad, None).is_err(), "{bad}");
        }
    }
}
