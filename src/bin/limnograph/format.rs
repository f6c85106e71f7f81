//! Numbers, units and moments as a person wants to read them.

use limnograph::series::record::Value;
use limnograph::series::schema::Kind;

/// A number with four significant digits.
pub fn number(value: f64) -> String {
    if value.is_nan() {
        return "nan".to_string();
    }
    if value.is_infinite() {
        return if value > 0.0 { "inf" } else { "-inf" }.to_string();
    }
    if value == 0.0 {
        return "0".to_string();
    }
    // Rounded first, so that 9999.7 is not printed with five digits.
    let scientific = format!("{value:.3e}");
    let Some((digits, exponent)) = scientific.split_once('e') else {
        return scientific;
    };
    let exponent: i32 = exponent.parse().unwrap_or(0);
    if (-3..5).contains(&exponent) {
        let decimals = (3 - exponent).max(0) as usize;
        return format!("{value:.decimals$}");
    }
    format!("{digits}e{exponent}")
}

/// A share with two significant digits, or none where that would be finer than it matters.
pub fn percent(share: f64) -> String {
    let percent = 100.0 * share;
    match percent {
        percent if percent >= 10.0 => format!("{percent:.0} %"),
        percent if percent >= 1.0 => format!("{percent:.1} %"),
        percent if percent >= 0.01 || percent <= 0.0 => format!("{percent:.2} %"),
        _ => "less than 0.01 %".to_string(),
    }
}

/// A cell that is not null; increments carry a plus sign.
pub fn value(value: &Value, kind: Kind) -> String {
    let text = match value {
        Value::Null => return "not measured".to_string(),
        Value::Float(value) => number(*value),
        Value::Integer(value) => value.to_string(),
        Value::Unsigned(value) => value.to_string(),
        Value::Text(text) => return super::screen::harmless(text),
        Value::Floats(values) => return format!("{} values", values.len()),
        Value::Counts(values) => return format!("{} counts", values.len()),
    };
    let is_positive = !text.starts_with('-') && !matches!(text.as_str(), "0" | "nan");
    if kind == Kind::Increment && is_positive {
        format!("+{text}")
    } else {
        text
    }
}

/// A unit string as people write it: `Msun/yr/Mpc^3` for `solMass.yr**-1.Mpc**-3`.
pub fn unit(unit: &str) -> String {
    let unit = super::screen::harmless(unit);
    let mut above = Vec::new();
    let mut below = Vec::new();
    for factor in unit.split('.').filter(|factor| !factor.is_empty()) {
        let (name, power) = factor.split_once("**").unwrap_or((factor, "1"));
        let name = match name {
            "solMass" => "Msun",
            "solLum" => "Lsun",
            "solRad" => "Rsun",
            other => other,
        };
        let power = power.trim_start_matches('(').trim_end_matches(')');
        match power.strip_prefix('-') {
            Some("1") => below.push(name.to_string()),
            Some(power) => below.push(format!("{name}^{power}")),
            None if power == "1" => above.push(name.to_string()),
            None => above.push(format!("{name}^{power}")),
        }
    }
    if above.is_empty() && !below.is_empty() {
        let inverse = |name: &String| match name.split_once('^') {
            Some((name, power)) => format!("{name}^-{power}"),
            None => format!("{name}^-1"),
        };
        return below.iter().map(inverse).collect::<Vec<_>>().join(" ");
    }
    let mut text = above.join(" ");
    for name in below {
        text.push('/');
        text.push_str(&name);
    }
    text
}

/// A number with its unit, without a trailing space for pure numbers.
pub fn with_unit(number: &str, unit_string: &str) -> String {
    let unit = unit(unit_string);
    if unit.is_empty() {
        number.to_string()
    } else {
        format!("{number} {unit}")
    }
}

/// A number and a noun: `1 row`, `2 rows`.
pub fn count(number: usize, noun: &str) -> String {
    if number == 1 {
        format!("1 {noun}")
    } else {
        format!("{number} {noun}s")
    }
}

/// How long ago, in one unit.
pub fn age(milliseconds: u64) -> String {
    let seconds = milliseconds / 1000;
    match seconds {
        0..120 => format!("{seconds} s"),
        120..7200 => format!("{} min", seconds / 60),
        7200..172_800 => format!("{} h", seconds / 3600),
        _ => format!("{} days", seconds / 86_400),
    }
}

/// A stretch of wall-clock time.
pub fn seconds(value: f64) -> String {
    match value {
        value if value < 1e-3 => format!("{} us", number(value * 1e6)),
        value if value < 1.0 => format!("{} ms", number(value * 1e3)),
        value => format!("{} s", number(value)),
    }
}

/// A moment given in milliseconds since 1970-01-01 UTC.
pub fn moment(milliseconds: u64) -> String {
    let seconds = milliseconds / 1000;
    let (days, second) = (seconds / 86_400, seconds % 86_400);
    let (year, month, day) = date(days);
    format!(
        "{year:04}-{month:02}-{day:02} {:02}:{:02}:{:02} UTC",
        second / 3600,
        second / 60 % 60,
        second % 60
    )
}

/// The Gregorian date of a day counted from 1970-01-01.
fn date(days: u64) -> (u64, u64, u64) {
    // Years that begin in March put the leap day last; 719468 days lie before 1970 since 0000-03-01.
    let days = days + 719_468;
    let (era, day_of_era) = (days / 146_097, days % 146_097);
    let year = (day_of_era - day_of_era / 1460 + day_of_era / 36_524 - day_of_era / 146_096) / 365;
    let day_of_year = day_of_era - (365 * year + year / 4 - year / 100);
    let month = (5 * day_of_year + 2) / 153;
    let day = day_of_year - (153 * month + 2) / 5 + 1;
    let month = if month < 10 { month + 3 } else { month - 9 };
    (era * 400 + year + u64::from(month <= 2), month, day)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_have_four_significant_digits() {
        let shown = [
            (0.012_345_6, "0.01235"),
            (123.456, "123.5"),
            (9999.7, "10000"),
            (99_999.7, "1.000e5"),
            (1.0e9, "1.000e9"),
            (-2.5e-7, "-2.500e-7"),
            (0.0, "0"),
            (f64::NAN, "nan"),
        ];
        for (value, text) in shown {
            assert_eq!(number(value), text);
        }
    }

    #[test]
    fn units_are_written_as_people_do() {
        let shown = [
            ("solMass.yr**-1.Mpc**-3", "Msun/yr/Mpc^3"),
            ("Mpc**-3", "Mpc^-3"),
            ("km.s**-1", "km/s"),
            ("g.cm**2", "g cm^2"),
            ("erg**(1/2)", "erg^1/2"),
            ("", ""),
        ];
        for (given, text) in shown {
            assert_eq!(unit(given), text);
        }
    }

    #[test]
    fn moments_are_gregorian() {
        // As `date -u -d @… '+%F %T'` prints them.
        assert_eq!(moment(0), "1970-01-01 00:00:00 UTC");
        assert_eq!(moment(951_782_400_000), "2000-02-29 00:00:00 UTC");
        assert_eq!(moment(1_717_718_399_000), "2024-06-06 23:59:59 UTC");
    }
}
