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

#[cfg(test)]
mod tests {
    use super::*;

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
