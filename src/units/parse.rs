//! Reads units the way people write them, and refuses what could be read in two ways.

use super::dimension::Dimension;
use super::names;
use super::nearest::{either, nearest};
use super::unit::{LARGEST_POWER, Symbols, Unit, UnitError, failure};

/// Longer texts are no units.
const LONGEST: usize = 200;
/// Brackets within brackets beyond this are no unit, and must not exhaust the stack.
const DEEPEST: usize = 20;

pub(super) fn parse(text: &str, symbols: &Symbols) -> Result<Unit, UnitError> {
    let letters: Vec<char> = text.chars().collect();
    if letters.len() > LONGEST {
        return Err(failure(format!(
            "is {} characters long; a unit has at most {LONGEST}",
            letters.len()
        )));
    }
    if !(symbols.solar_mass_g.is_normal() && symbols.solar_mass_g > 0.0) {
        return Err(failure(format!(
            "the solar mass {} g is not a number greater than 0",
            symbols.solar_mass_g
        )));
    }
    let mut reader = Reader {
        letters,
        at: 0,
        depth: 0,
        symbols,
    };
    reader.skip_spaces();
    if reader.peek().is_none() {
        return Err(reader.error("found nothing; expected a unit such as kpc/h or 1e10 Msun"));
    }
    let unit = reader.product()?;
    match reader.peek() {
        None => Ok(unit),
        Some(_) => Err(reader.error("found a closing bracket that was never opened")),
    }
}

struct Reader<'a> {
    letters: Vec<char>,
    at: usize,
    depth: usize,
    symbols: &'a Symbols,
}

/// What joins two factors.
enum Join {
    Times,
    Over,
    Space,
}

impl Reader<'_> {
    /// Factors joined by products and quotients, up to the end or a closing bracket.
    fn product(&mut self) -> Result<Unit, UnitError> {
        let (mut left, mut was_number) = self.factor()?;
        let mut divided = false;
        while let Some(join) = self.join() {
            self.skip_spaces();
            let start = self.at;
            let starts_with_digit = self.peek().is_some_and(|letter| letter.is_ascii_digit());
            if matches!(join, Join::Space) && divided {
                return Err(self.error(
                    "found a space after a quotient, which can be read in two ways; write a/(b c) or a/b*c",
                ));
            }
            if matches!(join, Join::Space) && was_number && starts_with_digit {
                return Err(
                    self.error("found two numbers in a row; write * between them if that is meant")
                );
            }
            let (right, is_number) = self.factor()?;
            let joined = match join {
                Join::Over => left.over(&right),
                Join::Times | Join::Space => left.times(&right),
            };
            left = joined.map_err(|error| UnitError {
                position: start + 1,
                ..error
            })?;
            divided = matches!(join, Join::Over);
            was_number = is_number;
        }
        Ok(left)
    }

    /// Moves over what joins the last factor to the next; nothing at the end or before a closing bracket.
    fn join(&mut self) -> Option<Join> {
        self.skip_spaces();
        match self.peek()? {
            ')' => None,
            '*' | '.' | '·' | '×' => {
                self.at += 1;
                Some(Join::Times)
            }
            '/' => {
                self.at += 1;
                Some(Join::Over)
            }
            _ => Some(Join::Space),
        }
    }

    /// A number, a name or a bracket, with its power; and whether it was a bare number.
    fn factor(&mut self) -> Result<(Unit, bool), UnitError> {
        self.skip_spaces();
        let start = self.at;
        let Some(letter) = self.peek() else {
            return Err(self.error("found the end; expected a unit, a number or a bracket"));
        };
        let mut is_number = false;
        let mut glued_power = None;
        let base = if letter.is_ascii_digit() {
            is_number = true;
            let value = self.number()?;
            Unit::from_cgs(value, Dimension::NUMBER).map_err(|error| UnitError {
                position: start + 1,
                ..error
            })?
        } else if letter == '(' {
            self.bracket()?
        } else if letter.is_alphabetic() || letter == '_' {
            let name = self.name();
            if name == "sqrt" {
                self.root()?
            } else {
                let unit =
                    names::look_up(&name, self.symbols).ok_or_else(|| unknown(&name, start + 1))?;
                glued_power = self.glued_power(&name)?;
                unit
            }
        } else {
            return Err(self.error(&format!(
                "found {letter:?}; expected a unit, a number or a bracket"
            )));
        };
        let power = match glued_power {
            Some(power) => Some(power),
            None => self.written_power()?,
        };
        match power {
            None => Ok((base, is_number)),
            Some(power) => {
                if self.at_power_sign() {
                    return Err(
                        self.error("found a power of a power; write one power or use brackets")
                    );
                }
                let unit = base.power(power).map_err(|error| UnitError {
                    position: start + 1,
                    ..error
                })?;
                Ok((unit, is_number))
            }
        }
    }

    fn bracket(&mut self) -> Result<Unit, UnitError> {
        if self.depth == DEEPEST {
            return Err(self.error(&format!(
                "found more than {DEEPEST} brackets within each other"
            )));
        }
        let open = self.at;
        self.at += 1;
        self.depth += 1;
        let unit = self.product()?;
        self.depth -= 1;
        if self.peek() != Some(')') {
            return Err(UnitError {
                position: open + 1,
                message: "found a bracket that is never closed".to_string(),
            });
        }
        self.at += 1;
        Ok(unit)
    }

    fn root(&mut self) -> Result<Unit, UnitError> {
        self.skip_spaces();
        if self.peek() != Some('(') {
            return Err(self.error("expected a bracket after sqrt, as in sqrt(a)"));
        }
        let start = self.at;
        self.bracket()?.power(0.5).map_err(|error| UnitError {
            position: start + 1,
            ..error
        })
    }

    /// `cm-3`, `km2`: one digit written straight after a name. More digits are a name misspelt (`h70`).
    fn glued_power(&mut self, name: &str) -> Result<Option<f64>, UnitError> {
        let signed = usize::from(matches!(self.peek(), Some('+' | '-')));
        let Some(digit) = self
            .letters
            .get(self.at + signed)
            .and_then(|letter| letter.to_digit(10))
        else {
            return Ok(None);
        };
        let more = self
            .letters
            .get(self.at + signed + 1)
            .is_some_and(|letter| letter.is_alphanumeric() || *letter == '_');
        if more {
            return Err(self.error(&format!(
                "found {name:?} followed by more than one digit; write powers as {name}^2"
            )));
        }
        let sign = if self.peek() == Some('-') { -1.0 } else { 1.0 };
        self.at += signed + 1;
        Ok(Some(sign * f64::from(digit)))
    }

    /// `^2`, `**-3`, `^(1/2)`; nothing where no power is written.
    fn written_power(&mut self) -> Result<Option<f64>, UnitError> {
        let before = self.at;
        self.skip_spaces();
        if !self.at_power_sign() {
            self.at = before;
            return Ok(None);
        }
        self.at += if self.peek() == Some('*') { 2 } else { 1 };
        self.skip_spaces();
        let start = self.at;
        let power = if self.peek() == Some('(') {
            self.at += 1;
            let mut power = self.signed_number()?;
            self.skip_spaces();
            if self.peek() == Some('/') {
                self.at += 1;
                power /= self.signed_number()?;
                self.skip_spaces();
            }
            if self.peek() != Some(')') {
                return Err(
                    self.error("expected a power such as (-3) or (1/2) and its closing bracket")
                );
            }
            self.at += 1;
            power
        } else {
            let power = self.signed_number()?;
            if self.peek() == Some('/')
                && self
                    .letters
                    .get(self.at + 1)
                    .is_some_and(char::is_ascii_digit)
            {
                return Err(self.error(
                    "found a power followed by / and a number, which can be read in two ways; write ^(1/2) for a \
                     root, or put the part before / in brackets",
                ));
            }
            power
        };
        if !(power.is_finite() && power.abs() <= LARGEST_POWER) {
            return Err(UnitError {
                position: start + 1,
                message: format!(
                    "found the power {power}; expected one between -{LARGEST_POWER} and {LARGEST_POWER}"
                ),
            });
        }
        Ok(Some(power))
    }

    fn signed_number(&mut self) -> Result<f64, UnitError> {
        self.skip_spaces();
        let sign = match self.peek() {
            Some('-') => -1.0,
            _ => 1.0,
        };
        if matches!(self.peek(), Some('+' | '-')) {
            self.at += 1;
        }
        if !self.peek().is_some_and(|letter| letter.is_ascii_digit()) {
            return Err(self.error("expected a power such as 2, -3 or (1/2)"));
        }
        Ok(sign * self.number()?)
    }

    /// `12`, `1.5`, `1e10`, `6.02E-23`. An `e` not followed by digits belongs to a unit, as in `1 eV`.
    fn number(&mut self) -> Result<f64, UnitError> {
        let start = self.at;
        self.skip_digits();
        if self.peek() == Some('.') && self.is_digit(1) {
            self.at += 1;
            self.skip_digits();
        }
        if matches!(self.peek(), Some('e' | 'E')) {
            let signed = usize::from(matches!(self.letters.get(self.at + 1), Some('+' | '-')));
            if self.is_digit(1 + signed) {
                self.at += 1 + signed;
                self.skip_digits();
            }
        }
        let digits: String = self.letters[start..self.at].iter().collect();
        digits.parse().map_err(|_| UnitError {
            position: start + 1,
            message: format!("found {digits:?}; expected a number"),
        })
    }

    fn name(&mut self) -> String {
        let start = self.at;
        while self
            .peek()
            .is_some_and(|letter| letter.is_alphabetic() || letter == '_')
        {
            self.at += 1;
        }
        self.letters[start..self.at].iter().collect()
    }

    fn at_power_sign(&self) -> bool {
        match self.peek() {
            Some('^') => true,
            Some('*') => self.letters.get(self.at + 1) == Some(&'*'),
            _ => false,
        }
    }

    fn is_digit(&self, ahead: usize) -> bool {
        self.letters
            .get(self.at + ahead)
            .is_some_and(char::is_ascii_digit)
    }

    fn skip_digits(&mut self) {
        while self.is_digit(0) {
            self.at += 1;
        }
    }

    fn skip_spaces(&mut self) {
        while self.peek().is_some_and(char::is_whitespace) {
            self.at += 1;
        }
    }

    fn peek(&self) -> Option<char> {
        self.letters.get(self.at).copied()
    }

    fn error(&self, message: &str) -> UnitError {
        UnitError {
            position: self.at + 1,
            message: message.to_string(),
        }
    }
}

fn unknown(name: &str, position: usize) -> UnitError {
    let near = nearest(name, names::all());
    let hint = if near.is_empty() {
        "known units are cm, km, kpc, Mpc, g, Msun, s, yr, Gyr, K, erg, with h and a".to_string()
    } else {
        let near: Vec<String> = near.into_iter().map(|name| format!("{name:?}")).collect();
        format!("did you mean {}?", either(&near))
    };
    UnitError {
        position,
        message: format!("{name:?} is not a known unit; {hint}"),
    }
}
