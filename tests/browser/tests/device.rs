//! The switch on the page: capacitance that depends on voltage, the offered feed coil, and the
//! shelf of devices.

use evenfall_browser_tests::{Browser, READY, page};
use evenfall_engine::design::{Capacitance, Feed};
use evenfall_engine::exchange::file;
use evenfall_engine::{answer::Answer, solve};
use serde_json::json;

const JUNCTION: &str = "e=1&ck=junction&device.capacitance.cj0_f=9e-10&device.capacitance.built_in_v=0.8&device.capacitance.grading=0.5&ron=0.12&fk=resonant&fq=1.3";

/// Puts a text into a field at once, as pasting does.
fn paste(browser: &Browser, test: &str, text: &str) {
    browser.script(&format!(
        "const f = document.querySelector('[data-test=\"{test}\"]'); f.value = {}; f.dispatchEvent(new Event('input', {{bubbles: true}}))",
        json!(text)
    ));
}

fn choose(browser: &Browser, kind: &str) {
    browser.script(&format!(
        "const s = document.querySelector('[data-test=field-capacitance_kind]'); s.value = '{kind}'; s.dispatchEvent(new Event('change', {{bubbles: true}}))"
    ));
}

fn value(browser: &Browser, test: &str) -> String {
    let script = format!("return document.querySelector('[data-test=\"{test}\"]')?.value ?? ''");
    let value = browser.script(&script);
    value.as_str().unwrap_or_default().to_owned()
}

fn count(browser: &Browser) -> u64 {
    let script =
        "return Object.keys(localStorage).filter(k => k.startsWith('evenfall/1/device/')).length";
    browser.script(script).as_u64().expect("a number")
}

/// Presses the first button with these words whose own or neighbour's text has the name.
fn press_words(browser: &Browser, name: &str) {
    browser.script(&format!(
        "[...document.querySelectorAll('.shelf button')].find(b => (b.getAttribute('aria-label') ?? b.textContent).includes({})).click()",
        json!(name)
    ));
}

#[test]
fn pasted_points_are_solved_and_a_wrong_row_is_named() {
    let site = page();
    let browser = Browser::start("points");
    browser.open(&format!("{}#{JUNCTION}", site.address));
    browser.wait("the page", READY);
    choose(&browser, "points");
    let good = "V\tC\n0\t900 pF\n10,5\t2,2e-10\n48\t120p\n200\t60p\n";
    paste(&browser, "field-points", good);
    let table = Capacitance::Points {
        v: vec![0.0, 10.5, 48.0, 200.0],
        c_f: vec![900e-12, 2.2e-10, 120e-12, 60e-12],
    };
    assert_eq!(browser.design().device.capacitance, table);
    let Answer::Solved(solved) = solve(&browser.design()) else {
        panic!("a stage");
    };
    let constant = solved.figures.constant_capacitance_peak_v.expect("it");
    assert!(
        browser.text("beside-constant").contains(&format!(
            "above the {}",
            evenfall_engine::quantity::format(constant, "V")
        )),
        "{}",
        browser.text("beside-constant")
    );
    assert!(browser.text("curve").contains("900 pF at 0 V"));
    // A wrong row is named with its line, the last good table stays, and nothing typed is lost.
    let wrong = good.replace("120p", "120 parsnips");
    paste(&browser, "field-points", &wrong);
    browser.wait(
        "the complaint",
        "return document.getElementById('field-points-problem').textContent.includes('Line 4')",
    );
    assert_eq!(browser.design().device.capacitance, table);
    choose(&browser, "junction");
    choose(&browser, "points");
    assert_eq!(value(&browser, "field-points"), wrong);
    assert_eq!(browser.design().device.capacitance, table);
    assert_eq!(browser.console_errors(), Vec::<String>::new());
}

#[test]
fn changing_the_kind_and_back_loses_nothing() {
    let site = page();
    let browser = Browser::start("kinds");
    browser.open(&format!("{}#{JUNCTION}", site.address));
    browser.wait("the page", READY);
    assert_eq!(value(&browser, "field-capacitance_kind"), "junction");
    browser.type_into("field-grading", "0.44");
    let before = browser.design();
    // Each other kind starts from the same energy, so that there still is a stage.
    for kind in ["constant", "points", "none"] {
        choose(&browser, kind);
        let other = browser.design();
        assert_ne!(other.device.capacitance, before.device.capacitance);
        assert!(matches!(solve(&other), Answer::Solved(_)), "{kind}");
    }
    choose(&browser, "junction");
    assert_eq!(browser.design(), before);
    // A long table survives the address.
    choose(&browser, "points");
    let rows: String = (0..200)
        .map(|k| format!("{k};{}p\n", 500 - 2 * k))
        .collect();
    paste(&browser, "field-points", &rows);
    let long = browser.design();
    browser.reload();
    browser.wait(
        "the page",
        "return !!document.querySelector('[data-test=field-points]')",
    );
    assert_eq!(browser.design(), long);
    assert_eq!(value(&browser, "field-points").lines().count(), 200);
}

#[test]
fn the_offered_feed_coil_is_taken_with_one_press() {
    let site = page();
    let browser = Browser::start("offer");
    browser.open(&format!("{}#{JUNCTION}", site.address));
    browser.wait("the page", READY);
    // With a choke this device is too large.
    browser.script("const s = document.querySelector('[data-test=field-feed_kind]'); s.value = 'choke'; s.dispatchEvent(new Event('change', {bubbles: true}))");
    browser.type_into("field-cj0", "1.1n");
    browser.wait(
        "the offer",
        "return !!document.querySelector('[data-test=use-feed]')",
    );
    assert!(browser.text("summary").starts_with("No such stage"));
    browser.press("use-feed");
    browser.wait(
        "the stage",
        "return !document.querySelector('[data-test=summary]').textContent.startsWith('No such stage')",
    );
    let taken = browser.design();
    assert!(matches!(taken.stage.feed, Feed::Resonant { .. }));
    assert!(matches!(solve(&taken), Answer::Solved(_)));
    assert_eq!(value(&browser, "field-feed_kind"), "resonant");
}

#[test]
fn devices_are_kept_used_removed_and_exchanged() {
    let site = page();
    let browser = Browser::start("devices");
    browser.open(&format!("{}#{JUNCTION}", site.address));
    browser.wait("the page", READY);
    browser.press("devices");
    browser.type_into("field-device_name", "own switch");
    let own = browser.design();
    browser.press("device-save");
    browser.wait(
        "the message",
        "return document.querySelector('[data-test=device-message]').textContent.includes('own switch')",
    );
    assert_eq!(count(&browser), 1);
    // Another one is taken; the brief stays, and there is a way back.
    press_words(&browser, "60 V");
    let other = browser.design();
    assert_eq!((&other.brief, &other.stage), (&own.brief, &own.stage));
    assert!(other.device.name.contains("60 V"));
    browser.press("device-back");
    assert_eq!(browser.design(), own);
    press_words(&browser, "own switch");
    assert_eq!(browser.design(), own);
    // Deleted and back.
    press_words(&browser, "delete own switch");
    assert_eq!(count(&browser), 0);
    browser.press("device-undo");
    browser.wait(
        "the entry",
        "return localStorage.getItem('evenfall/1/device/own switch') !== null",
    );
    // Out as JSON and in again, beside the one that is there.
    let text = value(&browser, "device-json");
    assert_eq!(file::read_devices(&text), Ok(vec![own.device.clone()]));
    let two = format!("[{text}, {{\"name\":\"second\",\"on_resistance_ohm\":0.5}}]");
    paste(&browser, "device-paste", &two);
    browser.press("device-import");
    browser.wait("three", "return Object.keys(localStorage).filter(k => k.startsWith('evenfall/1/device/')).length === 3");
    press_words(&browser, "own switch 2");
    let mut again = browser.design().device;
    again.name.clone_from(&own.device.name);
    assert_eq!(again, own.device);
    // An unknown field is named and nothing is stored.
    paste(&browser, "device-paste", "{\"name\":\"odd\",\"colour\":3}");
    browser.press("device-import");
    browser.wait(
        "the complaint",
        "return document.querySelector('[data-test=device-message]').textContent.includes('colour')",
    );
    assert_eq!(count(&browser), 3);
    assert_eq!(browser.console_errors(), Vec::<String>::new());
}

#[test]
fn every_invented_device_makes_a_stage_of_a_brief_of_its_kind() {
    let site = page();
    let browser = Browser::start("samples");
    for (name, brief) in [
        ("200 V", "e=1&fk=resonant&fq=1.3&v=36&p=60"),
        ("60 V", "e=1&f=7.15e6&p=20&v=12&fk=resonant&fq=1.3&q=4"),
        ("12 V", "e=1&f=433.92e6&p=0.1&v=1.8&fk=resonant&fq=1.3&q=3"),
    ] {
        browser.open(&format!("{}#{brief}", site.address));
        browser.reload();
        browser.wait("the page", READY);
        browser.press("devices");
        press_words(&browser, name);
        match solve(&browser.design()) {
            Answer::Solved(solved) => {
                let unmet = solved.verdicts.iter().find(|v| !v.met);
                assert!(unmet.is_none(), "{name}: {unmet:?}");
                assert!(solved.figures.constant_capacitance_peak_v.is_some());
            }
            Answer::Refused(refusal) => panic!("{name}: {}", refusal.reason),
        }
    }
}

#[test]
fn devices_that_cannot_be_read_stay_and_blocked_storage_is_said() {
    let site = page();
    let browser = Browser::start("odd-devices");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.script("localStorage.setItem('evenfall/1/device/broken', '{\"half')");
    browser.reload();
    browser.wait("the page", READY);
    browser.press("devices");
    browser.type_into("field-device_name", "broken");
    browser.press("device-save");
    browser.wait(
        "the message",
        "return document.querySelector('[data-test=device-message]').textContent.includes('broken 2')",
    );
    let left = browser.script("return localStorage.getItem('evenfall/1/device/broken')");
    assert_eq!(left.as_str(), Some("{\"half"));
    let blocked = Browser::start_without_storage("blocked-devices");
    blocked.open(&site.address);
    blocked.wait("the page", READY);
    blocked.press("devices");
    blocked.press("device-save");
    blocked.wait(
        "the message",
        "return document.querySelector('[data-test=device-message]').textContent.includes('store')",
    );
    // What comes with the page can still be taken.
    press_words(&blocked, "200 V");
    assert_eq!(blocked.design().device.rating_v, Some(200.0));
    assert_eq!(blocked.console_errors(), Vec::<String>::new());
}
