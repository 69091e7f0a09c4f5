//! Designs out of JSON values, field by field; what is wrong is said with its place.
//!
//! By hand and not by serde's derive: a table of names and one small function a type instead of
//! one parser a struct, which is 20 kB less for the page to send. A field that is missing from a
//! list here does not compile, and a test holds both readers together.

use crate::design::{
    Aim, Brief, Capacitance, Capacitor, Coil, Design, Device, Diode, Feed, Fitted, Form, Limits,
    Load, Mismatch, PerWidth, StageChoice, Upper, VERSION,
};
use serde_json::{Map, Value};
use std::fmt;

/// What is wrong with a value, and where.
#[derive(Debug)]
pub(super) struct Wrong {
    place: String,
    what: String,
}

impl Wrong {
    fn here(what: String) -> Self {
        Self {
            place: String::new(),
            what,
        }
    }

    /// The same, seen from one level further out.
    pub(super) fn within(self, place: &str) -> Self {
        let dot = if self.place.is_empty() { "" } else { "." };
        Self {
            place: format!("{place}{dot}{}", self.place),
            what: self.what,
        }
    }
}

impl fmt::Display for Wrong {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if !self.place.is_empty() {
            write!(f, "{}: ", self.place)?;
        }
        f.write_str(&self.what)
    }
}

/// What can be read out of a JSON value, in place, so that a field costs one call and no more.
pub(super) trait FromJson: Sized {
    /// What stands there before anything is read.
    fn blank() -> Self;
    /// Reads `value` into `self`; the first thing that is wrong is kept, the rest passed over.
    fn read(&mut self, value: &Value, wrong: &mut Option<Wrong>);

    /// One of them.
    fn from_json(value: &Value) -> Result<Self, Wrong> {
        let mut made = Self::blank();
        let mut wrong = None;
        made.read(value, &mut wrong);
        wrong.map_or(Ok(made), Err)
    }
}

/// What a value is, for a complaint.
fn found(value: &Value) -> String {
    match value {
        Value::Null => "null".to_owned(),
        Value::Bool(_) => "a yes or no".to_owned(),
        Value::Number(_) => "a number".to_owned(),
        Value::String(text) => format!("the text \"{text}\""),
        Value::Array(list) => format!("a list of {}", list.len()),
        Value::Object(_) => "an object".to_owned(),
    }
}

fn needed(what: &str, value: &Value, wrong: &mut Option<Wrong>) {
    let found = found(value);
    *wrong = Some(Wrong::here(format!("{what} is needed, not {found}")));
}

type Fields = Map<String, Value>;

/// An object whose every field is a known one and which has the necessary ones.
fn object<'v>(
    value: &'v Value,
    known: &[&str],
    necessary: &[&str],
    wrong: &mut Option<Wrong>,
) -> Option<&'v Fields> {
    let Value::Object(map) = value else {
        needed("an object", value, wrong);
        return None;
    };
    if let Some(key) = map.keys().find(|key| !known.contains(&key.as_str())) {
        let what = format!("unknown field; known here: {}", known.join(", "));
        *wrong = Some(Wrong::here(what).within(key));
    } else if let Some(key) = necessary.iter().find(|key| !map.contains_key(**key)) {
        *wrong = Some(Wrong::here("missing".to_owned()).within(key));
    }
    wrong.is_none().then_some(map)
}

/// Reads a field into its place where it is there.
#[inline(never)]
fn take<T: FromJson>(map: &Fields, key: &str, place: &mut T, wrong: &mut Option<Wrong>) {
    if let Some(value) = map.get(key)
        && wrong.is_none()
    {
        place.read(value, wrong);
        *wrong = wrong.take().map(|wrong| wrong.within(key));
    }
}

/// A plain value by its reader.
macro_rules! plain {
    ($type:ty, $what:literal, $read:expr) => {
        impl FromJson for $type {
            fn blank() -> Self {
                Self::default()
            }

            fn read(&mut self, value: &Value, wrong: &mut Option<Wrong>) {
                let read: fn(&Value) -> Option<$type> = $read;
                match read(value) {
                    Some(found) => *self = found,
                    None => needed($what, value, wrong),
                }
            }
        }
    };
}

fn numbers(value: &Value) -> Option<Vec<f64>> {
    value.as_array()?.iter().map(Value::as_f64).collect()
}

plain!(f64, "a number", Value::as_f64);
plain!(u32, "a whole number", |v| v.as_u64()?.try_into().ok());
plain!(bool, "true or false", Value::as_bool);
plain!(String, "a text", |v| v.as_str().map(str::to_owned));
plain!(Vec<f64>, "a list of numbers", numbers);
plain!([f64; 2], "a list of two numbers", |v| numbers(v)?
    .try_into()
    .ok());

impl<T: FromJson> FromJson for Option<T> {
    fn blank() -> Self {
        None
    }

    fn read(&mut self, value: &Value, wrong: &mut Option<Wrong>) {
        *self = None;
        if !value.is_null() {
            self.insert(T::blank()).read(value, wrong);
        }
    }
}

/// A struct: what stands where a field is absent, which fields must be there, and all of them.
macro_rules! fields {
    ($type:ident from $start:expr, must [$($must:ident),*], $($field:ident),+ $(,)?) => {
        impl FromJson for $type {
            fn blank() -> Self {
                $start
            }

            fn read(&mut self, value: &Value, wrong: &mut Option<Wrong>) {
                const KNOWN: &[&str] = &[$(stringify!($field)),+];
                const MUST: &[&str] = &[$(stringify!($must)),*];
                if let Some(map) = object(value, KNOWN, MUST, wrong) {
                    let Self { $($field),+ } = self;
                    $(take(map, stringify!($field), $field, wrong);)+
                }
            }
        }
    };
}

fields!(Design from Self {
    evenfall: VERSION,
    name: String::new(),
    brief: blank_brief(),
    device: Device::default(),
    stage: StageChoice::default(),
    fitted: Fitted::default(),
}, must [evenfall, brief], evenfall, name, brief, device, stage, fitted);

fn blank_brief() -> Brief {
    Brief {
        carrier_hz: 0.0,
        band_hz: None,
        power_w: None,
        supply_v: None,
        load: Load::default(),
        limits: Limits::default(),
        ambient_c: 25.0,
    }
}

fields!(Brief from blank_brief(), must [carrier_hz],
    carrier_hz, band_hz, power_w, supply_v, load, limits, ambient_c);
fields!(Load from Self { r_ohm: 0.0, x_ohm: 0.0 }, must [r_ohm], r_ohm, x_ohm);
fields!(Limits from Self::default(), must [],
    drain_fraction_of_rating, efficiency, junction_c, harmonic_dbc);
fields!(Device from Self::default(), must [],
    name, on_resistance_ohm, on_resistance_per_k, capacitance, diode, rating_v, rating_a,
    gate_charge_c, gate_drive_v, fall_time_s, per_width, upper, threshold_v, node_f,
    junction_to_ambient_k_per_w);
fields!(PerWidth from Self::default(), must [],
    on_resistance_ohm_m, output_f_per_m, gate_f_per_m, width_m, choose_stack);
fields!(Upper from Self::default(), must [], on_resistance_ohm, across_f, rating_v);
fields!(Diode from Self { forward_v: 0.0, slope_ohm: 0.0 }, must [forward_v],
    forward_v, slope_ohm);
fields!(StageChoice from Self::default(), must [],
    form, stack, duty, loaded_q, feed, coil_q, capacitor_q, aim, feed_coupling, cross_share,
    mismatch, trap_ratio, gate_supplies_v);
fields!(Mismatch from Self::default(), must [], on_resistance, duty, capacitance);
fields!(Fitted from Self::default(), must [],
    feed, shunt, series_coil, series_capacitor, cross, drain_load);
fields!(Coil from Self { l_h: 0.0, esr_ohm: None }, must [l_h], l_h, esr_ohm);
fields!(Capacitor from Self { c_f: 0.0, esr_ohm: None }, must [c_f], c_f, esr_ohm);

/// Which of several words a text is.
fn one_of(value: &Value, words: &[&str], wrong: &mut Option<Wrong>) -> Option<usize> {
    let text = value.as_str();
    let at = words.iter().position(|word| text == Some(word));
    if at.is_none() {
        needed(&format!("one of {}", words.join(", ")), value, wrong);
    }
    at
}

/// A choice among words.
macro_rules! words {
    ($type:ident, $($word:literal => $meant:ident),+) => {
        impl FromJson for $type {
            fn blank() -> Self {
                Self::default()
            }

            fn read(&mut self, value: &Value, wrong: &mut Option<Wrong>) {
                const WORDS: &[(&str, $type)] = &[$(($word, $type::$meant)),+];
                if let Some(at) = one_of(value, &[$($word),+], wrong) {
                    *self = WORDS[at].1;
                }
            }
        }
    };
}

words!(Form, "single" => Single, "differential" => Differential);
words!(Aim, "soft_switching" => SoftSwitching, "least_loss" => LeastLoss);

/// The fields of an object with a kind, and which kind of a list it is.
fn kind<'v>(
    value: &'v Value,
    kinds: &[&str],
    wrong: &mut Option<Wrong>,
) -> Option<(&'v Fields, usize)> {
    let Value::Object(map) = value else {
        needed("an object", value, wrong);
        return None;
    };
    let own = map.get("kind").unwrap_or(&Value::Null);
    let at = one_of(own, kinds, wrong);
    *wrong = wrong.take().map(|wrong| wrong.within("kind"));
    Some((map, at?))
}

/// The further fields of a kind, all of which must be there.
macro_rules! kind_fields {
    ($value:ident, $map:ident, $wrong:ident, $($field:ident),+) => {{
        const KNOWN: &[&str] = &["kind", $(stringify!($field)),+];
        object($value, KNOWN, KNOWN, $wrong);
        $(take($map, stringify!($field), $field, $wrong);)+
    }};
}

impl FromJson for Capacitance {
    fn blank() -> Self {
        Self::None
    }

    fn read(&mut self, value: &Value, wrong: &mut Option<Wrong>) {
        let kinds = ["none", "constant", "junction", "points"];
        let Some((map, at)) = kind(value, &kinds, wrong) else {
            return;
        };
        *self = match at {
            // It may have other fields: they are passed over, as in files from the beginning.
            0 => Self::None,
            1 => Self::Constant { c_f: 0.0 },
            2 => Self::Junction {
                cj0_f: 0.0,
                built_in_v: 0.0,
                grading: 0.0,
            },
            _ => Self::Points {
                v: Vec::new(),
                c_f: Vec::new(),
            },
        };
        match self {
            Self::None => {}
            Self::Constant { c_f } => kind_fields!(value, map, wrong, c_f),
            Self::Junction {
                cj0_f,
                built_in_v,
                grading,
            } => kind_fields!(value, map, wrong, cj0_f, built_in_v, grading),
            Self::Points { v, c_f } => kind_fields!(value, map, wrong, v, c_f),
        }
    }
}

impl FromJson for Feed {
    fn blank() -> Self {
        Self::default()
    }

    fn read(&mut self, value: &Value, wrong: &mut Option<Wrong>) {
        let kinds = [
            "choke",
            "resonant",
            "inductance",
            "parallel",
            "load_independent",
        ];
        let Some((map, at)) = kind(value, &kinds, wrong) else {
            return;
        };
        *self = match at {
            0 => Self::default(),
            1 => Self::Resonant { q: 0.0 },
            2 => Self::Inductance { l_h: 0.0 },
            3 => Self::Parallel {},
            _ => Self::LoadIndependent {},
        };
        match self {
            Self::Choke { reactance_ratio } => {
                object(value, &["kind", "reactance_ratio"], &[], wrong);
                take(map, "reactance_ratio", reactance_ratio, wrong);
            }
            Self::Resonant { q } => kind_fields!(value, map, wrong, q),
            Self::Inductance { l_h } => kind_fields!(value, map, wrong, l_h),
            Self::Parallel {} | Self::LoadIndependent {} => {
                object(value, &["kind"], &[], wrong);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exchange::link;

    /// Designs with every field set, once for each kind.
    fn full() -> Vec<Value> {
        let feeds = [
            r#"{"kind":"choke","reactance_ratio":12}"#,
            r#"{"kind":"choke"}"#,
            r#"{"kind":"resonant","q":1.3}"#,
            r#"{"kind":"inductance","l_h":1e-6}"#,
            r#"{"kind":"parallel"}"#,
            r#"{"kind":"load_independent"}"#,
        ];
        let capacitances = [
            r#"{"kind":"none"}"#,
            r#"{"kind":"constant","c_f":1e-10}"#,
            r#"{"kind":"junction","cj0_f":9e-10,"built_in_v":0.8,"grading":0.5}"#,
            r#"{"kind":"points","v":[0,10],"c_f":[9e-10,1e-10]}"#,
        ];
        let text = |feed: &str, capacitance: &str| {
            format!(
                r#"{{"evenfall":1,"name":"all","brief":{{"carrier_hz":6.78e6,"band_hz":[6e6,7e6],
                "power_w":60,"supply_v":48,"load":{{"r_ohm":50,"x_ohm":-3}},"ambient_c":40,
                "limits":{{"drain_fraction_of_rating":0.7,"efficiency":0.85,"junction_c":125,
                "harmonic_dbc":-43}}}},
                "device":{{"name":"d","on_resistance_ohm":0.12,"on_resistance_per_k":0.007,
                "capacitance":{capacitance},"diode":{{"forward_v":0.8,"slope_ohm":0.05}},
                "rating_v":200,"rating_a":15,"gate_charge_c":1e-8,"gate_drive_v":10,
                "fall_time_s":2e-9,"per_width":{{"on_resistance_ohm_m":1e-3,
                "output_f_per_m":1e-9,"gate_f_per_m":2e-9,"width_m":1e-3,"choose_stack":true}},
                "upper":{{"on_resistance_ohm":0.2,"across_f":1e-12,"rating_v":5}},
                "threshold_v":0.4,"node_f":1e-13,"junction_to_ambient_k_per_w":3}},
                "stage":{{"form":"differential","stack":2,"duty":0.45,"loaded_q":5,"feed":{feed},
                "coil_q":200,"capacitor_q":1000,"aim":"least_loss","feed_coupling":0.2,
                "cross_share":0.5,"mismatch":{{"on_resistance":0.1,"duty":0.01,
                "capacitance":0.02}},"trap_ratio":3,"gate_supplies_v":[1.2]}},
                "fitted":{{"feed":{{"l_h":1e-6,"esr_ohm":0.1}},"shunt":{{"c_f":1e-10,
                "esr_ohm":0.2}},"series_coil":{{"l_h":2e-6,"esr_ohm":0.3}},
                "series_capacitor":{{"c_f":2e-10,"esr_ohm":0.4}},"cross":{{"c_f":3e-11,
                "esr_ohm":0.5}},"drain_load":{{"r_ohm":8,"x_ohm":1}}}}}}"#
            )
        };
        let pairs = feeds.iter().map(|feed| text(feed, capacitances[2]));
        let more = capacitances.iter().map(|c| text(feeds[0], c));
        pairs
            .chain(more)
            .map(|text| serde_json::from_str(&text).expect("JSON"))
            .collect()
    }

    /// Both readers on one value.
    fn same(value: &Value) {
        let by_hand = Design::from_json(value).ok();
        let derived = serde_json::from_value::<Design>(value.clone()).ok();
        assert_eq!(by_hand, derived, "{value}");
    }

    /// Every value with one change somewhere inside.
    fn changed(value: &Value, change: &dyn Fn(&mut Value), into: &mut Vec<Value>) {
        let mut own = value.clone();
        change(&mut own);
        into.push(own);
        let keys: Vec<String> = match value {
            Value::Object(map) => map.keys().cloned().collect(),
            Value::Array(list) => (0..list.len()).map(|k| k.to_string()).collect(),
            _ => Vec::new(),
        };
        for key in keys {
            let pointer = format!("/{key}");
            let mut inner = Vec::new();
            changed(value.pointer(&pointer).expect("it"), change, &mut inner);
            for new in inner {
                let mut whole = value.clone();
                *whole.pointer_mut(&pointer).expect("it") = new;
                into.push(whole);
            }
        }
    }

    #[test]
    fn it_reads_and_refuses_what_the_derived_reader_does() {
        let changes: [&dyn Fn(&mut Value); 6] = [
            &|v| *v = Value::Null,
            &|v| *v = "text".into(),
            &|v| *v = 7.into(),
            &|v| *v = 0.5.into(),
            &|v| {
                if let Value::Object(map) = v {
                    map.insert("colour".to_owned(), 3.into());
                }
            },
            &|v| {
                if let Value::Object(map) = v
                    && let Some(first) = map.keys().next().cloned()
                {
                    map.remove(&first);
                }
            },
        ];
        let mut count = 0;
        for whole in full() {
            same(&whole);
            assert!(Design::from_json(&whole).is_ok(), "{whole}");
            for change in changes {
                let mut all = Vec::new();
                changed(&whole, change, &mut all);
                count += all.len();
                all.iter().for_each(same);
            }
            let written = serde_json::to_value(Design::from_json(&whole).expect("it"));
            same(&written.expect("JSON"));
        }
        assert!(count > 4000, "{count}");
        same(&serde_json::to_value(link::base()).expect("JSON"));
    }

    #[test]
    fn what_is_wrong_is_said_with_its_place() {
        for (text, place, word) in [
            (r#"{"evenfall":1}"#, "brief", "missing"),
            (
                r#"{"evenfall":1,"brief":{"carrier_hz":1,"limits":{"colour":3}}}"#,
                "brief.limits.colour",
                "harmonic_dbc",
            ),
            (
                r#"{"evenfall":1,"brief":{"carrier_hz":"x"}}"#,
                "brief.carrier_hz",
                "number",
            ),
            (
                r#"{"evenfall":1,"brief":{"carrier_hz":1},"stage":{"feed":{"kind":"resonant"}}}"#,
                "stage.feed.q",
                "missing",
            ),
            (
                r#"{"evenfall":1,"brief":{"carrier_hz":1},"stage":{"feed":{"kind":"none"}}}"#,
                "stage.feed.kind",
                "choke",
            ),
        ] {
            let value: Value = serde_json::from_str(text).expect("JSON");
            let wrong = Design::from_json(&value).expect_err(text).to_string();
            assert!(wrong.starts_with(place) && wrong.contains(word), "{wrong}");
        }
    }
}
