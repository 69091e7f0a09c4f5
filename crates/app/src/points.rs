//! Rows of a datasheet's curve as they are pasted: a voltage and a capacitance on each line.

use evenfall_engine::charge::{ChargeLaw, LawError};
use evenfall_engine::quantity;

/// Above this a capacitance of a switch is a forgotten prefix, farads.
const MOST_F: f64 = 1e-3;

/// A table of voltages and capacitances, or what is wrong, each with its line.
pub(crate) type Table = Result<(Vec<f64>, Vec<f64>), Vec<String>>;

/// Reads pasted rows. The first line may name the columns; empty lines are passed over.
pub(crate) fn read(text: &str) -> Table {
    let mut lines = Vec::new();
    let (mut volts, mut farads, mut wrong) = (Vec::new(), Vec::new(), Vec::new());
    for (index, line) in text.lines().enumerate() {
        let is_heading = lines.is_empty() && !line.contains(|c: char| c.is_ascii_digit());
        if line.trim().is_empty() || is_heading {
            continue;
        }
        match row(line.trim()) {
            Ok((volt, farad)) => {
                volts.push(volt);
                farads.push(farad);
            }
            Err(problem) => wrong.push(format!("Line {}: {problem}", index + 1)),
        }
        lines.push(index + 1);
    }
    if !wrong.is_empty() {
        return Err(wrong);
    }
    match ChargeLaw::points(&volts, &farads) {
        Ok(_) => Ok((volts, farads)),
        Err(LawError::Row { row, reason, .. }) => Err(vec![format!(
            "Line {}: {reason}.",
            lines.get(row - 1).unwrap_or(&row)
        )]),
        Err(error) => Err(vec![format!("{error}.")]),
    }
}

/// The two values of a line. What parts them is, in this order, a tab, a semicolon, a comma
/// with a blank behind it, blanks, or a comma; the first that leaves two values is taken.
fn row(line: &str) -> Result<(f64, f64), String> {
    let mut first_problem = None;
    for part in ["\t", ";", ", ", " ", ","] {
        let mut found: Option<(f64, f64)> = None;
        for (at, _) in line.match_indices(part) {
            let (volt, farad) = (&line[..at], &line[at + part.len()..]);
            match two(volt, farad) {
                Ok(_) if found.is_some() && part == "," => {
                    return Err("there is more than one way to read its commas; part the columns by a tab or semicolon.".to_owned());
                }
                Ok(values) => found = found.or(Some(values)),
                Err(problem) => {
                    if !volt.trim().is_empty() && !farad.trim().is_empty() {
                        first_problem.get_or_insert(problem);
                    }
                }
            }
        }
        if let Some((volt, farad)) = found {
            if farad.abs() > MOST_F {
                return Err(format!(
                    "{} is no capacitance of a switch; write picofarads as 120p.",
                    quantity::format(farad, "F")
                ));
            }
            return Ok((volt, farad));
        }
    }
    Err(first_problem.unwrap_or_else(|| {
        "a voltage and a capacitance belong on each line, such as 25 120p.".to_owned()
    }))
}

fn two(volt: &str, farad: &str) -> Result<(f64, f64), String> {
    let read = |text: &str, unit| {
        // A blank may stand before a unit, not between two numbers.
        let mut words = text.split_whitespace().skip(1);
        if words.any(|word| word.starts_with(|c: char| !c.is_alphabetic())) {
            return Err("there are more than two values.".to_owned());
        }
        quantity::parse(text, unit).map_err(|e| e.to_string())
    };
    Ok((read(volt, "V")?, read(farad, "F")?))
}

/// A table as rows that read back to the digit.
pub(crate) fn write(volts: &[f64], farads: &[f64]) -> String {
    let farad = |value: f64| {
        let short = quantity::format(value, "F");
        if quantity::parse(&short, "F") == Ok(value) {
            short
        } else {
            quantity::format_exact(value)
        }
    };
    let rows = volts.iter().zip(farads);
    rows.map(|(v, c)| format!("{}\t{}\n", quantity::format_exact(*v), farad(*c)))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_usual_way_of_parting_columns_is_read() {
        let (v, c) = (vec![0.0, 10.5, 48.0], vec![900e-12, 2.2e-9, 1.2e-10]);
        for text in [
            "0\t900p\n10.5\t2.2n\n48\t1.2e-10",
            "V;C\n0;900p\n10,5;2,2n\n48;120p",
            "0,900p\r\n10.5,2.2n\r\n\r\n48,1.2e-10\r\n",
            "0, 900p\n10,5, 2,2n\n48, 120 pF",
            "  0   900 pF\n10,5  2,2n\n48 V 120 pF",
            "0 V\t900 pF\n10.5 V\t2,2 nF\n48 V\t120 pF",
        ] {
            assert_eq!(read(text), Ok((v.clone(), c.clone())), "{text}");
        }
        assert_eq!(read(&write(&v, &c)), Ok((v, c)));
    }

    #[test]
    fn wrong_rows_are_named_with_their_line() {
        for (text, line, word) in [
            ("0 900p\n10 parsnips\n20 100p", "Line 2", "parsnips"),
            ("0 900p\n\n10\n20 100p", "Line 3", "each line"),
            ("0 900p\n10 5 2n", "Line 2", "more than two"),
            ("0\t900p\t50p\n10\t5p", "Line 1", "more than two"),
            ("0 900p\n20 200p\n10 100p", "Line 3", "rise"),
            ("0 900p\n10 -3p", "Line 2", "greater than zero"),
            ("0 900\n10 100", "Line 1", "picofarads"),
            ("0 900p\n10,5,2,2n\n2,1,3n", "Line 3", "commas"),
            ("0 900p", "the capacitance points", "2 to"),
            ("", "the capacitance points", "2 to"),
        ] {
            let wrong = read(text).expect_err(text).join(" ");
            assert!(
                wrong.contains(line) && wrong.contains(word),
                "{text}: {wrong}"
            );
        }
    }
}
