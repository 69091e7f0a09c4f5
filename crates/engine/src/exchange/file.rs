//! The design file, version 1.

use super::read::FromJson;
use crate::design::{Design, Device, VERSION};
use serde_json::Value;
use std::fmt;

/// Why a text is no design file.
#[derive(Debug, Clone, PartialEq)]
pub enum FileError {
    /// Not the JSON of a design; the message names the field and the place.
    Content {
        /// What the reader says.
        message: String,
    },
    /// Not the JSON of a device, or of several; the message names the field and the place.
    Device {
        /// What the reader says.
        message: String,
    },
    /// A version that this engine does not know.
    Version {
        /// The file's version.
        found: u32,
    },
}

impl fmt::Display for FileError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Content { message } => write!(f, "this is not a design file: {message}"),
            Self::Device { message } => write!(f, "this is no device: {message}"),
            Self::Version { found } => {
                write!(
                    f,
                    "the file is of version {found}; this engine reads version {VERSION}"
                )
            }
        }
    }
}

impl std::error::Error for FileError {}

fn json(text: &str) -> Result<Value, String> {
    serde_json::from_str(text).map_err(|e| e.to_string())
}

/// One design out of a JSON value.
///
/// # Errors
/// See [`FileError`].
pub fn from_value(value: &Value) -> Result<Design, FileError> {
    let version = value.get("evenfall").and_then(Value::as_u64);
    if let Some(found) = version.and_then(|found| u32::try_from(found).ok())
        && found != VERSION
    {
        return Err(FileError::Version { found });
    }
    Design::from_json(value).map_err(|wrong| FileError::Content {
        message: wrong.to_string(),
    })
}

/// One design.
///
/// # Errors
/// See [`FileError`].
pub fn read(text: &str) -> Result<Design, FileError> {
    let value = json(text).map_err(|message| FileError::Content { message })?;
    from_value(&value)
}

/// One design or an array of them; the flag says whether it was an array.
///
/// # Errors
/// See [`FileError`].
pub fn read_many(text: &str) -> Result<(Vec<Design>, bool), FileError> {
    let value = json(text).map_err(|message| FileError::Content { message })?;
    match value {
        Value::Array(list) => Ok((list.iter().map(from_value).collect::<Result<_, _>>()?, true)),
        one => Ok((vec![from_value(&one)?], false)),
    }
}

/// The design as a file.
pub fn write(design: &Design) -> String {
    serde_json::to_string_pretty(design).unwrap_or_default()
}

/// One device (the design file's `device` object), or an array of them.
///
/// # Errors
/// See [`FileError`].
pub fn read_devices(text: &str) -> Result<Vec<Device>, FileError> {
    let wrong = |message| FileError::Device { message };
    match json(text).map_err(wrong)? {
        Value::Array(list) => {
            let devices = list.iter().enumerate().map(|(index, value)| {
                Device::from_json(value).map_err(|w| w.within(&format!("device {}", index + 1)))
            });
            devices.collect::<Result<_, _>>()
        }
        one => Device::from_json(&one).map(|device| vec![device]),
    }
    .map_err(|w| wrong(w.to_string()))
}

/// The device as the design file's `device` object.
pub fn write_device(device: &Device) -> String {
    serde_json::to_string_pretty(device).unwrap_or_default()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_full_file_reads_and_comes_back() {
        let text = r#"{"evenfall":1,"name":"glue press driver",
          "brief":{"carrier_hz":13.56e6,"band_hz":[13.553e6,13.567e6],"power_w":60,"supply_v":48,
            "load":{"r_ohm":50,"x_ohm":0},
            "limits":{"drain_fraction_of_rating":0.8,"efficiency":0.85,"junction_c":125,"harmonic_dbc":-43}},
          "device":{"name":"sample","on_resistance_ohm":0.12,"on_resistance_per_k":0.007,
            "capacitance":{"kind":"junction","cj0_f":900e-12,"built_in_v":0.8,"grading":0.5},
            "diode":{"forward_v":0.8,"slope_ohm":0.05},"rating_v":200,"rating_a":15,
            "gate_charge_c":12e-9,"gate_drive_v":10,"fall_time_s":2e-9,"junction_to_ambient_k_per_w":3.0},
          "stage":{"form":"single","stack":1,"duty":0.5,"loaded_q":7,"feed":{"kind":"choke"},"coil_q":200,"capacitor_q":1000},
          "fitted":{"feed":{"l_h":4.0e-6,"esr_ohm":0.05},"shunt":{"c_f":180e-12}}}"#;
        let design = read(text).expect("the file");
        assert_eq!(design.fitted.shunt.map(|s| s.c_f), Some(180e-12));
        assert_eq!(read(&write(&design)), Ok(design));
    }

    #[test]
    fn an_unknown_field_is_named() {
        let error = read(r#"{"evenfall":1,"brief":{"carrier_hz":1e6,"colour":3}}"#)
            .expect_err("unknown field");
        assert!(error.to_string().contains("colour"), "{error}");
        assert_eq!(
            read(r#"{"evenfall":9,"brief":{"carrier_hz":1e6}}"#),
            Err(FileError::Version { found: 9 })
        );
    }

    #[test]
    fn devices_read_alone_and_in_an_array_and_come_back() {
        let text = r#"{"name":"sample","on_resistance_ohm":0.12,
          "capacitance":{"kind":"points","v":[0,10,48],"c_f":[9e-10,3e-10,1e-10]}}"#;
        let alone = read_devices(text).expect("one");
        assert_eq!(read_devices(&write_device(&alone[0])), Ok(alone.clone()));
        let two = read_devices(&format!("[{text},\n{{}}]")).expect("two");
        assert_eq!(two, [alone[0].clone(), Device::default()]);
        let error = read_devices(r#"[{"name":"a"},{"colour":3}]"#).expect_err("unknown field");
        assert!(error.to_string().contains("colour"), "{error}");
        assert!(read_devices("").is_err() && read_devices("3").is_err());
    }
}
