//! Natural order of file names (frame2 before frame10) and the frame number in a name.
//! Runs of digits compare by value, everything else byte by byte. Ties (`02` and `2`) fall back to the
//! plain order, so that the order is total.

use std::cmp::Ordering;

/// Compares two names in natural order.
pub(super) fn natural(a: &str, b: &str) -> Ordering {
    let (mut left, mut right) = (a.as_bytes(), b.as_bytes());
    loop {
        let (Some(&x), Some(&y)) = (left.first(), right.first()) else {
            return left.len().cmp(&right.len()).then_with(|| a.cmp(b));
        };
        if x.is_ascii_digit() && y.is_ascii_digit() {
            let (m, after_m) = split_digits(left);
            let (n, after_n) = split_digits(right);
            let by_value = m.len().cmp(&n.len()).then_with(|| m.cmp(n));
            if by_value != Ordering::Equal {
                return by_value;
            }
            (left, right) = (after_m, after_n);
        } else if x == y {
            (left, right) = (&left[1..], &right[1..]);
        } else {
            return x.cmp(&y);
        }
    }
}

/// The leading digits without their leading zeros, and the rest.
fn split_digits(text: &[u8]) -> (&[u8], &[u8]) {
    let end = text.iter().position(|byte| !byte.is_ascii_digit()).unwrap_or(text.len());
    let (digits, rest) = text.split_at(end);
    let zeros = digits.iter().position(|byte| *byte != b'0').unwrap_or(digits.len());
    (&digits[zeros..], rest)
}

/// The last run of digits in a file's name without its extension: the frame number, when it has one.
pub(super) fn number(file: &str) -> Option<u64> {
    let name = file.rsplit(['/', '\\']).next()?;
    let stem = name.rsplit_once('.').map_or(name, |(stem, _)| stem);
    let end = stem.rfind(|letter: char| letter.is_ascii_digit())? + 1;
    let start = stem[..end]
        .rfind(|letter: char| !letter.is_ascii_digit())
        .map_or(0, |at| at + stem[at..].chars().next().map_or(1, char::len_utf8));
    stem[start..end].parse().ok()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn digits_compare_by_value() {
        let mut names = vec!["f10.png", "f2.png", "f02.png", "f1.png", "e.png", "f2b.png", "f2.png.tif"];
        names.sort_by(|a, b| natural(a, b));
        assert_eq!(names, ["e.png", "f1.png", "f02.png", "f2.png", "f2.png.tif", "f2b.png", "f10.png"]);
        assert_eq!(natural("f99999999999999999999999.png", "f100000000000000000000000.png"), Ordering::Less);
    }

    #[test]
    fn the_number_is_the_last_one_before_the_extension() {
        assert_eq!(number("run3/frame_0012.tif"), Some(12));
        assert_eq!(number("frame.mp4"), None);
        assert_eq!(number("µ7é.png"), Some(7));
        assert_eq!(number("f99999999999999999999999.png"), None);
    }

    proptest::proptest! {
        #[test]
        fn it_is_an_order(mut names in proptest::collection::vec("[a0-2.]{0,4}", 3)) {
            names.sort_by(|a, b| natural(a, b));
            for pair in [(0, 1), (1, 2), (0, 2)] {
                proptest::prop_assert_ne!(natural(&names[pair.0], &names[pair.1]), Ordering::Greater);
                proptest::prop_assert_eq!(natural(&names[pair.0], &names[pair.1]), natural(&names[pair.1], &names[pair.0]).reverse());
            }
        }
    }
}
