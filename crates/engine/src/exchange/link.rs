//! The link: a design as readable name=value pairs, only what differs from [`base`].
//!
//! Names are paths of the design file with short aliases for the common ones, values are
//! JSON scalars. A pair that cannot be read is reported and the rest is kept. The names
//! and the base of version 1 never change, so that an old link opens for ever.

use super::file;
use crate::design::{Brief, Design, Device, Fitted, Limits, Load, StageChoice, VERSION};
use serde_json::{Map, Value};

/// Short names of version 1, with the paths they stand for.
const SHORT: [(&str, &str); 34] = [
    ("n", "name"),
    ("f", "brief.carrier_hz"),
    ("f1", "brief.band_hz.0"),
    ("f2", "brief.band_hz.1"),
    ("p", "brief.power_w"),
    ("v", "brief.supply_v"),
    ("r", "brief.load.r_ohm"),
    ("x", "brief.load.x_ohm"),
    ("lv", "brief.limits.drain_fraction_of_rating"),
    ("le", "brief.limits.efficiency"),
    ("lt", "brief.limits.junction_c"),
    ("lh", "brief.limits.harmonic_dbc"),
    ("ron", "device.on_resistance_ohm"),
    ("ck", "device.capacitance.kind"),
    ("c", "device.capacitance.c_f"),
    ("vf", "device.diode.forward_v"),
    ("rf", "device.diode.slope_ohm"),
    ("rv", "device.rating_v"),
    ("ra", "device.rating_a"),
    ("d", "stage.duty"),
    ("q", "stage.loaded_q"),
    ("fk", "stage.feed.kind"),
    ("fr", "stage.feed.reactance_ratio"),
    ("fq", "stage.feed.q"),
    ("fl", "stage.feed.l_h"),
    ("ql", "stage.coil_q"),
    ("qc", "stage.capacitor_q"),
    ("a", "stage.aim"),
    ("l1", "fitted.feed.l_h"),
    ("c1", "fitted.shunt.c_f"),
    ("l2", "fitted.series_coil.l_h"),
    ("c2", "fitted.series_capacitor.c_f"),
    ("rl", "fitted.drain_load.r_ohm"),
    ("xl", "fitted.drain_load.x_ohm"),
];

/// Columns of numbers, each written as one pair.
const TABLE: [&str; 2] = ["device.capacitance.v", "device.capacitance.c_f"];
/// What ends each number of a column.
const BETWEEN: &str = "_";

/// What a link of version 1 leaves out: 60 W at 13.56 MHz from 48 V, loaded Q 7, a choke
/// and an ideal switch.
pub fn base() -> Design {
    Design {
        evenfall: VERSION,
        name: String::new(),
        brief: Brief {
            carrier_hz: 13.56e6,
            band_hz: None,
            power_w: Some(60.0),
            supply_v: Some(48.0),
            load: Load::default(),
            limits: Limits::default(),
            ambient_c: 25.0,
        },
        device: Device::default(),
        stage: StageChoice::default(),
        fitted: Fitted::default(),
    }
}

/// The design file as a JSON value. By way of its text, so that the page carries one writer
/// and one reader of designs and not two.
fn as_json(design: &Design) -> Value {
    serde_json::from_str(&file::write(design)).unwrap_or_default()
}

/// Leaves of a JSON value with their paths.
fn leaves(value: &Value, path: &str, into: &mut Vec<(String, Value)>) {
    let join = |key: &str| {
        if path.is_empty() {
            key.to_owned()
        } else {
            format!("{path}.{key}")
        }
    };
    match value {
        Value::Object(map) => map.iter().for_each(|(key, v)| leaves(v, &join(key), into)),
        Value::Array(list) if TABLE.contains(&path) => {
            let numbers: Vec<String> = list.iter().map(|n| text(n) + BETWEEN).collect();
            let column = if numbers.is_empty() {
                BETWEEN.to_owned()
            } else {
                numbers.concat()
            };
            into.push((path.to_owned(), Value::String(column)));
        }
        Value::Array(list) => list
            .iter()
            .enumerate()
            .for_each(|(k, v)| leaves(v, &join(&k.to_string()), into)),
        leaf => into.push((path.to_owned(), leaf.clone())),
    }
}

fn flat(design: &Design) -> Vec<(String, Value)> {
    let mut list = Vec::new();
    leaves(&as_json(design), "", &mut list);
    list
}

fn text(value: &Value) -> String {
    match value {
        Value::String(s) => s.clone(),
        Value::Null => "none".to_owned(),
        Value::Number(n) => crate::quantity::format_exact(n.as_f64().unwrap_or_default()),
        Value::Bool(yes) => yes.to_string(),
        Value::Array(_) | Value::Object(_) => String::new(),
    }
}

/// The link's fragment, without the leading `#`.
pub fn write(design: &Design) -> String {
    let (base, wanted) = (flat(&base()), flat(design));
    let mut pairs = vec![("e".to_owned(), VERSION.to_string())];
    let name = |path: &str| {
        SHORT
            .iter()
            .find(|(_, p)| *p == path)
            .map_or(path, |(s, _)| s)
            .to_owned()
    };
    for (path, value) in &wanted {
        if path != "evenfall" && !base.contains(&(path.clone(), value.clone())) {
            pairs.push((name(path), text(value)));
        }
    }
    for (path, _) in &base {
        if !wanted.iter().any(|(p, _)| p == path) {
            pairs.push((name(path), "none".to_owned()));
        }
    }
    let mut out = form_urlencoded::Serializer::new(String::new());
    out.extend_pairs(pairs);
    out.finish()
}

/// The design of a fragment, and a sentence for each pair that could not be read.
pub fn read(fragment: &str) -> (Design, Vec<String>) {
    let mut problems = Vec::new();
    let mut design = as_json(&base());
    let mut seen = Vec::new();
    let fragment = fragment.trim_start_matches('#');
    if fragment.len() > 20_000 {
        return (
            base(),
            vec!["the link is too long to be a design".to_owned()],
        );
    }
    let pairs: Vec<(String, String)> = form_urlencoded::parse(fragment.as_bytes())
        .into_owned()
        .collect();
    let mut postponed: Vec<(String, String)> = Vec::new();
    for (name, text) in pairs {
        if seen.contains(&name) {
            problems.push(format!(
                "\"{name}\" stands twice in the link; the first one counts"
            ));
            continue;
        }
        seen.push(name.clone());
        if name == "e" {
            if text != VERSION.to_string() {
                problems.push(format!(
                    "the link is of version {text}; this page reads version {VERSION}"
                ));
                return (base(), problems);
            }
            continue;
        }
        postponed.push((name, text));
    }
    // A group whole where it can be (what may stand in it depends on its kind), else pair
    // by pair, so that one bad pair costs only itself.
    apply_together(&mut design, &mut postponed);
    postponed.retain(|(name, text)| !apply(&mut design, name, text));
    for (name, text) in postponed {
        let text: String = text.chars().take(40).collect();
        problems.push(format!(
            "\"{name}={text}\" in the link is not understood and was left out"
        ));
    }
    (
        file::from_value(&design).unwrap_or_else(|_| base()),
        problems,
    )
}

fn path_of(name: &str) -> &str {
    SHORT
        .iter()
        .find(|(s, _)| *s == name)
        .map_or(name, |(_, path)| path)
}

fn scalar(path: &str, text: &str) -> Value {
    if path == "name" || path == "device.name" {
        return Value::String(text.to_owned());
    }
    if TABLE.contains(&path) && text.contains(BETWEEN) {
        let numbers = text.split(BETWEEN).filter(|number| !number.is_empty());
        return Value::Array(numbers.map(|number| scalar("", number)).collect());
    }
    if text == "none" && !path.ends_with("kind") {
        return Value::Null;
    }
    match serde_json::from_str::<Value>(text) {
        Ok(plain @ (Value::Number(_) | Value::Bool(_))) => plain,
        _ => Value::String(text.to_owned()),
    }
}

fn set(value: &mut Value, path: &str, leaf: Value) -> Option<()> {
    let (key, rest) = path
        .split_once('.')
        .map_or((path, None), |(k, r)| (k, Some(r)));
    if let Ok(index) = key.parse::<usize>() {
        if !value.is_array() {
            *value = Value::Array(Vec::new());
        }
        let list = value.as_array_mut()?;
        if index >= crate::charge::MOST_POINTS {
            return None;
        }
        while list.len() <= index {
            list.push(Value::Null);
        }
        return match rest {
            Some(rest) => set(&mut list[index], rest, leaf),
            None => {
                list[index] = leaf;
                Some(())
            }
        };
    }
    if !value.is_object() {
        *value = Value::Object(Map::new());
    }
    let map = value.as_object_mut()?;
    match rest {
        Some(rest) => set(map.entry(key).or_insert(Value::Null), rest, leaf),
        None => {
            // A change of kind starts its group anew.
            if key == "kind" && map.get(key) != Some(&leaf) {
                map.clear();
                if leaf == "choke" {
                    map.insert("reactance_ratio".to_owned(), 30.0.into());
                }
            }
            map.insert(key.to_owned(), leaf);
            Some(())
        }
    }
}

fn valid(design: &Value) -> bool {
    file::from_value(design).is_ok()
}

/// Sets one pair where the design stays valid by it.
fn apply(design: &mut Value, name: &str, text: &str) -> bool {
    let path = path_of(name);
    let mut trial = design.clone();
    let done = set(&mut trial, path, scalar(path, text)).is_some() && valid(&trial);
    if done {
        *design = trial;
    }
    done
}

/// Sets the pairs of each group together.
fn apply_together(design: &mut Value, postponed: &mut Vec<(String, String)>) {
    let group = |name: &str| {
        path_of(name)
            .split('.')
            .take(2)
            .collect::<Vec<_>>()
            .join(".")
    };
    // A kind starts its group anew, so it comes first.
    let (mut ordered, rest): (Vec<_>, Vec<_>) = std::mem::take(postponed)
        .into_iter()
        .partition(|(name, _)| path_of(name).ends_with(".kind"));
    ordered.extend(rest);
    *postponed = ordered;
    let groups: Vec<String> = postponed.iter().map(|(name, _)| group(name)).collect();
    for wanted in groups {
        let mut trial = design.clone();
        let set_all = postponed
            .iter()
            .filter(|(name, _)| group(name) == wanted)
            .all(|(name, text)| {
                set(&mut trial, path_of(name), scalar(path_of(name), text)).is_some()
            });
        if set_all && valid(&trial) {
            *design = trial;
            postponed.retain(|(name, _)| group(name) != wanted);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::design::{Capacitance, Capacitor, Diode, Feed};

    #[test]
    fn a_design_comes_back_to_the_digit_and_stays_short() {
        let mut design = base();
        design.name = "glue press & co = 5 %".into();
        design.brief.carrier_hz = 6.78e6;
        design.brief.band_hz = Some([6.765e6, 6.795e6]);
        design.brief.power_w = None;
        design.brief.limits.harmonic_dbc = Some(-43.0);
        design.device.on_resistance_ohm = 0.1 + 0.2;
        design.device.capacitance = Capacitance::Constant {
            c_f: 1.0 / 3.0 * 1e-10,
        };
        design.device.diode = Some(Diode {
            forward_v: 0.8,
            slope_ohm: 0.05,
        });
        design.stage.feed = Feed::Inductance { l_h: 4.7e-6 };
        design.stage.coil_q = Some(200.0);
        design.fitted.shunt = Some(Capacitor {
            c_f: 180e-12,
            esr_ohm: None,
        });
        let link = write(&design);
        assert!(link.len() < 300, "{} characters: {link}", link.len());
        assert_eq!(read(&link), (design, Vec::new()));
        assert_eq!(write(&base()), "e=1");
    }

    #[test]
    fn points_and_kinds_come_back() {
        for capacitance in [
            Capacitance::Junction {
                cj0_f: 9e-10,
                built_in_v: 0.8,
                grading: 0.5,
            },
            Capacitance::Points {
                v: vec![0.0, 10.0, 48.0],
                c_f: vec![9e-10, 3e-10, 1e-10],
            },
        ] {
            let mut design = base();
            design.device.capacitance = capacitance;
            design.stage.feed = Feed::Resonant { q: 1.412 };
            assert_eq!(read(&write(&design)), (design, Vec::new()));
        }
    }

    #[test]
    fn a_long_table_and_an_empty_one_come_back() {
        for count in [0, 1, 3, 200] {
            let mut design = base();
            design.device.capacitance = Capacitance::Points {
                v: (0..count).map(|k| f64::from(k) / 3.0).collect(),
                c_f: (0..count).map(|k| 1e-9 / (1.0 + f64::from(k))).collect(),
            };
            assert_eq!(read(&write(&design)), (design, Vec::new()), "{count} rows");
        }
        // As links were written before.
        let (design, problems) = read(
            "e=1&ck=points&device.capacitance.v.0=0&device.capacitance.v.1=9&device.capacitance.c_f.0=9e-10&device.capacitance.c_f.1=1e-10",
        );
        assert!(problems.is_empty(), "{problems:?}");
        let want = Capacitance::Points {
            v: vec![0.0, 9.0],
            c_f: vec![9e-10, 1e-10],
        };
        assert_eq!(design.device.capacitance, want);
    }

    #[test]
    fn one_bad_pair_is_named_and_the_rest_kept() {
        let (design, problems) = read("e=1&v=24&p=NaN&f=1e400&hostile=<b>&v=12");
        assert_eq!(design.brief.supply_v, Some(24.0));
        assert_eq!(design.brief.power_w, Some(60.0));
        assert_eq!(problems.len(), 4, "{problems:?}");
        assert_eq!(read("e=7&v=24").0, base());
        assert_eq!(read("%%%&=&a.b.c.0.1=2").0, base());
    }
}
