//! Values of options, read and validated.

/// Reads `n=38`.
pub(crate) fn given(text: &str) -> Result<(String, f64), String> {
    let Some((name, value)) = text.split_once('=') else {
        return Err("write it as NAME=NUMBER, such as n=38".to_string());
    };
    let (name, value) = (name.trim(), value.trim());
    if value.contains("..") {
        return Err("ranges of givens are not available yet; give one number".to_string());
    }
    match value.parse::<f64>() {
        Ok(number) if number.is_finite() && !name.is_empty() => Ok((name.to_string(), number)),
        _ => Err(format!("`{value}` is not a finite number; write it as NAME=NUMBER, such as n=38")),
    }
}

/// Reads a number of evaluations: `1e6`, `2.5e7`, `1000000`, `1_000_000`.
pub(crate) fn evaluations(text: &str) -> Result<u64, String> {
    let refused = || format!("`{text}` is not a whole number of evaluations, from 1 to 1e18; write 1e6 or 1_000_000");
    let digits = text.trim().replace('_', "");
    if let Ok(count) = digits.parse::<u64>() {
        return if (1..=10u64.pow(18)).contains(&count) { Ok(count) } else { Err(refused()) };
    }
    let number: f64 = digits.parse().map_err(|_| refused())?;
    if (1.0..=1e18).contains(&number) && number.fract() == 0.0 { Ok(number as u64) } else { Err(refused()) }
}

/// Reads a time: `90s`, `15m`, `8h`, `1h30m`, `2d`.
pub(crate) fn time(text: &str) -> Result<std::time::Duration, String> {
    let refused = || format!("`{text}` is not a time; write 90s, 15m, 8h, 1h30m or 2d");
    let mut rest = text.trim();
    let mut seconds: u64 = 0;
    let mut last_unit = u64::MAX;
    while !rest.is_empty() {
        let end = rest.find(|c: char| !c.is_ascii_digit()).ok_or_else(refused)?;
        let number: u64 = rest[..end].parse().map_err(|_| refused())?;
        let unit = match rest.as_bytes()[end] {
            b'd' => 86_400,
            b'h' => 3600,
            b'm' => 60,
            b's' => 1,
            _ => return Err(refused()),
        };
        // Larger units first and none twice: `30m1h` or `5s5s` is more likely a slip than a wish.
        if unit >= last_unit {
            return Err(refused());
        }
        last_unit = unit;
        seconds = number.checked_mul(unit).and_then(|more| seconds.checked_add(more)).ok_or_else(refused)?;
        rest = &rest[end + 1..];
    }
    let longest = 3650 * 86_400;
    if (1..=longest).contains(&seconds) { Ok(std::time::Duration::from_secs(seconds)) } else { Err(refused()) }
}

/// What ends a hunt.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Until {
    /// A value this low, or this high for a maximum.
    Target(f64),
    /// A coverage of the survey, with 95 % confidence.
    Coverage(f64),
    /// So many evaluations without a lower value.
    Quiet(u64),
}

/// Reads `target=-44.3268`, `coverage=0.99` or `quiet=1e7`.
pub(crate) fn until(text: &str) -> Result<Until, String> {
    let (name, value) = text.split_once('=').unwrap_or((text, ""));
    let number = value.trim().parse::<f64>();
    match (name.trim(), number) {
        ("target", Ok(number)) if number.is_finite() => Ok(Until::Target(number)),
        ("target", _) => Err(format!("`{value}` is not a finite number; write target=-44.3268")),
        ("coverage", Ok(number)) if 0.0 < number && number < 1.0 => Ok(Until::Coverage(number)),
        ("coverage", _) => Err(format!("`{value}` is not a share between 0 and 1; write coverage=0.99")),
        ("quiet", _) => evaluations(value).map(Until::Quiet),
        (name, _) => Err(format!("there is no condition `{name}`; write target=-44.3268, coverage=0.99 or quiet=1e7")),
    }
}

/// Reads a share from 0 to 1.
pub(crate) fn share(text: &str) -> Result<f64, String> {
    let refused = || format!("`{text}` is not a share; write a number from 0 to 1, such as 0.2");
    let number: f64 = text.trim().parse().map_err(|_| refused())?;
    if (0.0..=1.0).contains(&number) { Ok(number) } else { Err(refused()) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn evaluations_are_whole_and_positive() {
        for (text, count) in [("1e6", 1_000_000), ("2.5e7", 25_000_000), ("1_000_000", 1_000_000), ("1", 1)] {
            assert_eq!(evaluations(text), Ok(count), "{text}");
        }
        assert_eq!(evaluations("1e18"), Ok(10u64.pow(18)), "the limit itself");
        for text in ["0", "", "-5", "1.5", "1e19", "1000000000000000001", "inf", "nan", "many"] {
            assert!(evaluations(text).is_err(), "{text}");
        }
    }

    #[test]
    fn times_have_units_and_order() {
        for (text, seconds) in [("90s", 90), ("15m", 900), ("8h", 28_800), ("1h30m", 5400), ("2d", 172_800)] {
            assert_eq!(time(text), Ok(std::time::Duration::from_secs(seconds)), "{text}");
        }
        for text in ["", "8", "h", "30m1h", "5s5s", "-5s", "1.5h", "0s", "99999999999999999999s", "9999999d", "5µ"] {
            assert!(time(text).is_err(), "{text}");
        }
    }

    #[test]
    fn conditions_are_told_apart() {
        assert_eq!(until("target=-44.3268"), Ok(Until::Target(-44.3268)));
        assert_eq!(until("coverage=0.99"), Ok(Until::Coverage(0.99)));
        assert_eq!(until("quiet=1e7"), Ok(Until::Quiet(10_000_000)));
        assert!(until("target=low").unwrap_err().contains("finite"));
        for text in ["coverage=1", "coverage=0", "coverage=nan", "coverage=99", "coverage"] {
            assert!(until(text).unwrap_err().contains("between 0 and 1"), "{text}");
        }
        assert!(until("quiet=0").unwrap_err().contains("evaluations"));
        assert!(until("luck=1").unwrap_err().contains("no condition `luck`"));
    }

    #[test]
    fn givens_are_a_name_and_a_finite_number() {
        assert_eq!(given("n=38"), Ok(("n".to_string(), 38.0)));
        assert_eq!(given(" w = -2.5e-3 "), Ok(("w".to_string(), -2.5e-3)));
        for text in ["n", "n=", "=3", "n=x", "n=inf", "n=nan"] {
            assert!(given(text).is_err(), "{text}");
        }
        assert!(given("n=5..30").unwrap_err().contains("not available yet"));
    }
}
