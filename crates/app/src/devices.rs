//! Devices kept in this browser: put into the design, saved from it, exchanged as JSON; and
//! three invented ones to begin with.

use crate::pieces::{button, live, press, toggle, typed};
use crate::shelf::{Kind, Shelf};
use crate::state::App;
use evenfall_engine::design::{Capacitance, Device};
use evenfall_engine::exchange::file;
use evenfall_engine::quantity;
use leptos::prelude::*;

static DEVICES: Kind = Kind {
    tests: [
        "device-save",
        "device-undo",
        "device-back",
        "device-message",
    ],
    save: "Keep this device",
    prefix: "evenfall/1/device/",
    good: |text| first(text).is_some(),
    name: |app| app.design.with_untracked(|d| d.device.name.clone()),
    set_name: |app, name| app.design.update(|d| name.clone_into(&mut d.device.name)),
    text: own_text,
    renamed: |text, name| {
        first(text).map_or_else(
            || text.to_owned(),
            |mut device| {
                name.clone_into(&mut device.name);
                file::write_device(&device)
            },
        )
    },
    take: |app, text| {
        if let Some(device) = first(text) {
            let mut design = app.design.get_untracked();
            design.device = device;
            app.replace(design);
        }
    },
    detail: |text| first(text).map_or_else(String::new, |device| detail(&device)),
};

/// Invented devices, as they would be exported.
const SAMPLES: [&str; 3] = [
    r#"{"name":"Sample: board switch, 200 V","on_resistance_ohm":0.12,"on_resistance_per_k":0.007,"capacitance":{"kind":"junction","cj0_f":9e-10,"built_in_v":0.8,"grading":0.5},"diode":{"forward_v":0.8,"slope_ohm":0.05},"rating_v":200,"rating_a":15,"gate_charge_c":1.2e-8,"gate_drive_v":10,"fall_time_s":2e-9,"junction_to_ambient_k_per_w":20}"#,
    r#"{"name":"Sample: low-voltage switch, 60 V","on_resistance_ohm":0.045,"on_resistance_per_k":0.005,"capacitance":{"kind":"points","v":[0,0.5,1,2,5,10,20,30,45,60],"c_f":[8.2e-10,7.1e-10,6.4e-10,5.4e-10,4.0e-10,3.05e-10,2.3e-10,1.95e-10,1.7e-10,1.6e-10]},"diode":{"forward_v":0.75,"slope_ohm":0.03},"rating_v":60,"rating_a":18,"gate_charge_c":7e-9,"gate_drive_v":5,"fall_time_s":1.5e-9,"junction_to_ambient_k_per_w":35}"#,
    r#"{"name":"Sample: small fast switch, 12 V","on_resistance_ohm":0.5,"on_resistance_per_k":0.003,"capacitance":{"kind":"junction","cj0_f":4.5e-12,"built_in_v":0.7,"grading":0.35},"rating_v":12,"rating_a":1,"gate_charge_c":6e-12,"gate_drive_v":1.8}"#,
];

/// The first device of a text.
fn first(text: &str) -> Option<Device> {
    file::read_devices(text).ok()?.into_iter().next()
}

fn own_text(app: App) -> String {
    app.design.with(|d| file::write_device(&d.device))
}

/// One line on a device.
fn detail(device: &Device) -> String {
    let mut parts = vec![quantity::format(device.on_resistance_ohm, "Ω")];
    parts.extend(device.rating_v.map(|v| quantity::format(v, "V")));
    parts.push(match &device.capacitance {
        Capacitance::None => "no capacitance".to_owned(),
        Capacitance::Constant { c_f } => quantity::format(*c_f, "F"),
        Capacitance::Junction { cj0_f, .. } => {
            format!("{} at 0 V, junction law", quantity::format(*cj0_f, "F"))
        }
        Capacitance::Points { v, .. } => format!("{} capacitance points", v.len()),
    });
    parts.join(" · ")
}

/// Puts the devices of a pasted text on the shelf; what to say of it.
fn import(shelf: Shelf, text: &str) -> String {
    let devices = match file::read_devices(text) {
        Ok(devices) => devices,
        Err(error) => return error.to_string(),
    };
    let mut names = Vec::new();
    for device in devices {
        let wanted = if device.name.trim().is_empty() {
            "unnamed"
        } else {
            device.name.trim()
        };
        match shelf.add(wanted, &file::write_device(&device)) {
            Ok(name) => names.push(format!("\"{name}\"")),
            Err(problem) => return problem,
        }
    }
    match names.len() {
        0 => "There is no device in it.".to_owned(),
        _ => format!("Kept: {}.", names.join(", ")),
    }
}

/// The name of the device, the shelf, and the devices as JSON.
pub(crate) fn devices(app: App) -> AnyView {
    let shelf = Shelf::new(app, &DEVICES);
    let rename = typed(move |name| app.design.update(|d| d.device.name = name));
    let all = RwSignal::new(false);
    let pasted = StoredValue::new(String::new());
    let keep = press(move || {
        let said = import(shelf, &pasted.get_value());
        shelf.message.set(said);
    });
    let pick = |value: bool, words: &'static str| {
        let pressed = live(move || (all.get() == value).to_string());
        toggle(words, pressed, press(move || all.set(value)))
    };
    let shown = live(move || {
        if all.get() {
            format!("[{}]\n", shelf.texts().join(",\n"))
        } else {
            own_text(app)
        }
    });
    let samples: Vec<AnyView> = SAMPLES
        .iter()
        .filter_map(|text| {
            let device = first(text)?;
            let say = detail(&device);
            Some(shelf.sample(device.name, text, say))
        })
        .collect();
    view! {
        <details class="bench">
            <summary data-test="devices"><h3>"Devices kept in this browser"</h3></summary>
            <p class="field">
                <label for="field-device_name">"Name of this device"</label>
                <input id="field-device_name" data-test="field-device_name" type="text" maxlength="80" autocomplete="off"
                    prop:value=live(move || app.design.with(|d| d.device.name.clone()))
                    on:input=rename/>
            </p>
            {shelf.buttons()}
            {shelf.list()}
            <p class="origin">"Invented ones to begin with; the brief stays as it is whichever is taken."</p>
            <ul class="shelf">{samples}</ul>
            <details>
                <summary>"Devices as JSON"</summary>
                <p class="buttons">{pick(false, "this device")}{pick(true, "every kept one")}</p>
                <textarea readonly rows="6" aria-label="Devices as JSON" data-test="device-json">{shown}</textarea>
                <textarea rows="4" aria-label="Paste devices as JSON" data-test="device-paste" placeholder="Paste one device or several here" on:input=typed(move |text| pasted.set_value(text))></textarea>
                <p class="buttons">{button("device-import", "Keep the pasted devices", keep)}</p>
            </details>
        </details>
    }
    .into_any()
}
