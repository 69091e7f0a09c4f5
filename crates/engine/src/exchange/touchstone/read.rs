//! Reading versions 1.1 and 2.0, line by line.

use super::rows::{Layout, Options, Order, number, resistance, start_of};
use super::{Fault, Point, Touchstone, TouchstoneError};

/// Reads a file of one or two ports.
///
/// Version 1 does not say how many ports there are: the first row's count of numbers does.
/// Noise parameters are passed over. A row is one line, as both versions ask of one and two
/// ports.
///
/// # Errors
/// See [`Fault`], each with its line.
pub fn read(text: &str) -> Result<Touchstone, TouchstoneError> {
    let mut reader = Reader::default();
    let mut last = 0;
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);
    for (number, line) in (1..).zip(text.lines()) {
        last = number;
        let content = line.split('!').next().unwrap_or_default().trim();
        let read = if content.is_empty() {
            Ok(())
        } else {
            reader.line(content)
        };
        read.map_err(|fault| TouchstoneError {
            line: number,
            fault,
        })?;
        if reader.place == Place::End {
            break;
        }
    }
    reader
        .finish()
        .map_err(|fault| TouchstoneError { line: last, fault })
}

#[derive(Debug, Clone, Copy, PartialEq, Default)]
enum Place {
    #[default]
    Header,
    /// Inside what only people read.
    Information,
    /// After [Reference], which may go over several lines.
    Reference,
    Data,
    Noise,
    End,
}

#[derive(Debug, Clone, Copy, PartialEq)]
enum Matrix {
    Full,
    Triangle,
}

#[derive(Default)]
struct Reader {
    place: Place,
    version_2: bool,
    options: Option<Options>,
    ports: Option<usize>,
    order: Option<Order>,
    matrix: Option<Matrix>,
    announced: Option<usize>,
    reference_ohm: Vec<f64>,
    layout: Option<Layout>,
    points: Vec<Point>,
}

fn before(found: &'static str, wanted: &'static str) -> Fault {
    Fault::Order { found, wanted }
}

impl Reader {
    fn line(&mut self, content: &str) -> Result<(), Fault> {
        if let Some(rest) = content.strip_prefix('[') {
            let Some((keyword, value)) = rest.split_once(']') else {
                let word = start_of(content);
                return Err(Fault::Unknown { word });
            };
            let words: Vec<&str> = keyword.split_whitespace().take(5).collect();
            return self.keyword(&words.join(" ").to_ascii_lowercase(), value.trim());
        }
        match self.place {
            Place::Information | Place::Noise | Place::End => Ok(()),
            _ if content.starts_with('#') => self.option_line(&content[1..]),
            Place::Reference => self.references(content),
            Place::Data => self.row(content),
            Place::Header if self.version_2 => {
                let first = content.split_whitespace().next().unwrap_or_default();
                number(first)?;
                Err(before("data", "[Network Data]"))
            }
            Place::Header => {
                let first = content.split_whitespace().next().unwrap_or_default();
                number(first)?;
                let options = self.options.ok_or(before("data", "the option line"))?;
                // Three numbers are a one-port; whatever else has to be the nine of a two-port.
                let ports = match content.split_whitespace().take(4).count() {
                    0..=3 => 1,
                    _ => 2,
                };
                self.layout = Some(Layout {
                    options,
                    ports,
                    order: Order::Columns,
                    reference_ohm: [options.reference_ohm; 2],
                    normalised: true,
                });
                self.place = Place::Data;
                self.row(content)
            }
        }
    }

    fn option_line(&mut self, text: &str) -> Result<(), Fault> {
        if self.options.is_some() {
            // Only the first counts.
            return Ok(());
        }
        if self.ports.is_some() {
            return Err(before("[Number of Ports]", "the option line"));
        }
        self.options = Some(Options::read(text)?);
        Ok(())
    }

    fn keyword(&mut self, keyword: &str, value: &str) -> Result<(), Fault> {
        let word = || start_of(&format!("[{keyword}] {value}"));
        let unknown = || Err(Fault::Unknown { word: word() });
        if self.place == Place::Information {
            if keyword == "end information" {
                self.place = Place::Header;
            }
            return Ok(());
        }
        if keyword == "version" {
            if self.version_2 || self.options.is_some() || self.layout.is_some() {
                return Err(before("the option line", "[Version]"));
            }
            self.version_2 = value == "2.0";
            return if self.version_2 {
                Ok(())
            } else {
                Err(Fault::Unsupported { word: word() })
            };
        }
        if !self.version_2 {
            return Err(before("a keyword", "[Version]"));
        }
        let in_data = matches!(self.place, Place::Data | Place::Noise);
        if in_data && !matches!(keyword, "noise data" | "end") {
            return Err(before("[Network Data]", "this keyword"));
        }
        if self.place == Place::Reference {
            let (found, wanted) = (self.reference_ohm.len(), self.ports.unwrap_or(0));
            if found != wanted {
                return Err(Fault::Columns { found, wanted });
            }
            self.place = Place::Header;
        }
        let count = || {
            let wrong = |_| Fault::Number {
                text: start_of(value),
            };
            value.parse::<usize>().map_err(wrong)
        };
        let ports = || {
            self.ports
                .ok_or(before("this keyword", "[Number of Ports]"))
        };
        match keyword {
            "number of ports" => {
                if self.options.is_none() {
                    return Err(before("[Number of Ports]", "the option line"));
                }
                let ports = count()?;
                if !(1..=2).contains(&ports) {
                    return Err(Fault::Ports { ports });
                }
                self.ports = Some(ports);
            }
            "two-port data order" | "two-port order" => {
                ports()?;
                self.order = Some(match value {
                    "21_12" => Order::Columns,
                    "12_21" => Order::Rows,
                    _ => return unknown(),
                });
            }
            "number of frequencies" => {
                ports()?;
                self.announced = match count()? {
                    0 => {
                        let text = start_of(value);
                        return Err(Fault::Number { text });
                    }
                    rows => Some(rows),
                };
            }
            "number of noise frequencies" => {
                count()?;
            }
            "reference" => {
                ports()?;
                if !self.reference_ohm.is_empty() {
                    return Err(before("[Reference]", "another [Reference]"));
                }
                self.place = Place::Reference;
                self.references(value)?;
            }
            "matrix format" => {
                self.matrix = Some(match value.to_ascii_lowercase().as_str() {
                    "full" => Matrix::Full,
                    "lower" | "upper" => Matrix::Triangle,
                    _ => return unknown(),
                });
            }
            "begin information" => self.place = Place::Information,
            "network data" => self.begin()?,
            "noise data" => {
                if self.place != Place::Data {
                    return Err(before("[Noise Data]", "[Network Data]"));
                }
                self.place = Place::Noise;
            }
            "end" => {
                if !in_data {
                    return Err(before("[End]", "[Network Data]"));
                }
                self.place = Place::End;
            }
            "mixed-mode order" => return Err(Fault::Unsupported { word: word() }),
            _ => return unknown(),
        }
        Ok(())
    }

    fn references(&mut self, text: &str) -> Result<(), Fault> {
        let wanted = self.ports.unwrap_or(0);
        for word in text.split_whitespace() {
            if self.reference_ohm.len() == wanted {
                let found = wanted + 1;
                return Err(Fault::Columns { found, wanted });
            }
            self.reference_ohm.push(resistance(word)?);
        }
        Ok(())
    }

    fn begin(&mut self) -> Result<(), Fault> {
        let ports = self
            .ports
            .ok_or(before("[Network Data]", "[Number of Ports]"))?;
        let options = self
            .options
            .ok_or(before("[Network Data]", "the option line"))?;
        if self.announced.is_none() {
            return Err(before("[Network Data]", "[Number of Frequencies]"));
        }
        let order = match (ports, self.order) {
            (2, None) => return Err(before("[Network Data]", "[Two-Port Data Order]")),
            (_, order) => order.unwrap_or(Order::Columns),
        };
        let reference_ohm = match *self.reference_ohm.as_slice() {
            [one, two] => [one, two],
            [one] => [one; 2],
            _ => [options.reference_ohm; 2],
        };
        self.layout = Some(Layout {
            options,
            ports,
            order: if self.matrix == Some(Matrix::Triangle) {
                Order::Symmetric
            } else {
                order
            },
            reference_ohm,
            normalised: false,
        });
        self.place = Place::Data;
        Ok(())
    }

    fn row(&mut self, content: &str) -> Result<(), Fault> {
        let Some(layout) = self.layout else {
            return Ok(());
        };
        let before_hz = self.points.last().map(|p| p.hz);
        // In version 1 a two-port's noise rows of five numbers follow, from a lower frequency on.
        if let Some(before_hz) = before_hz
            && !self.version_2
            && layout.ports == 2
            && content.split_whitespace().take(6).count() == 5
        {
            let first = content.split_whitespace().next().unwrap_or_default();
            if layout.options.hertz(first)? <= before_hz {
                self.place = Place::Noise;
                return Ok(());
            }
        }
        if let Some(announced) = self.announced
            && self.points.len() == announced
        {
            return Err(Fault::TooMany { announced });
        }
        let point = layout.row(content)?;
        if let Some(before_hz) = before_hz
            && point.hz <= before_hz
        {
            let hz = point.hz;
            return Err(Fault::NotRising { hz, before_hz });
        }
        self.points.push(point);
        Ok(())
    }

    fn finish(self) -> Result<Touchstone, Fault> {
        let rows = self.points.len();
        let announced = self.announced.unwrap_or(0);
        let unfinished = self.version_2 && self.place != Place::End;
        match self.layout {
            Some(layout) if rows > 0 && rows >= announced && !unfinished => Ok(Touchstone {
                ports: layout.ports,
                reference_ohm: layout.reference_ohm,
                points: self.points,
            }),
            _ => Err(Fault::Truncated { rows, announced }),
        }
    }
}
