//! The page, used: type a brief, read the answer, pin, share, break the storage, go offline.

#![allow(clippy::print_stderr, reason = "figures for the log")]

use evenfall_browser_tests::{Browser, READY, dist, page};
use evenfall_engine::answer::{Answer, Solved};
use evenfall_engine::{quantity, solve};

/// The engine's own answer to the design that the address holds.
fn native(browser: &Browser) -> Solved {
    match solve(&browser.design()) {
        Answer::Solved(solved) => solved,
        Answer::Refused(refusal) => panic!("{}", refusal.reason),
    }
}

#[track_caller]
fn same_digits(browser: &Browser, solved: &Solved) {
    let f = &solved.figures;
    for (name, value, unit) in [
        ("output_power_w", f.output_power_w, "W"),
        ("supply_power_w", f.supply_power_w, "W"),
        ("supply_current_a", f.supply_current_a, "A"),
        ("drain_peak_v", f.drain_peak_v, "V"),
        ("switch_peak_a", f.switch_peak_a, "A"),
        ("loaded_q", f.loaded_q, ""),
    ] {
        assert_eq!(
            browser.text(&format!("figure-{name}")),
            quantity::format(value, unit),
            "{name}"
        );
    }
}

#[test]
fn a_brief_is_answered_as_the_engine_answers_it() {
    let site = page();
    let browser = Browser::start("brief");
    browser.open(&site.address);
    browser.wait("the page", READY);
    same_digits(&browser, &native(&browser));
    browser.type_into("field-power", "25W");
    browser.type_into("field-supply", "24");
    browser.type_into("field-carrier", "6,78M");
    let solved = native(&browser);
    let power = solved.figures.output_power_w;
    assert!((power / 25.0 - 1.0).abs() < 1e-6, "{power} W");
    same_digits(&browser, &solved);
    // Wrong text keeps the answer and says so beside the field.
    browser.type_into("field-power", "25 parsnips");
    assert!(
        browser
            .script("return document.getElementById('field-power-problem').textContent")
            .as_str()
            .is_some_and(|t| t.contains("unit"))
    );
    same_digits(&browser, &solved);
    assert_eq!(browser.console_errors(), Vec::<String>::new());
}

#[test]
fn a_changed_load_fails_its_verdict_and_a_link_carries_the_digits() {
    let site = page();
    let browser = Browser::start("load");
    browser.open(&site.address);
    browser.wait("the page", READY);
    assert!(
        browser.text("summary").contains("may be built"),
        "{}",
        browser.text("summary")
    );
    browser.press("hold-all");
    browser.type_into("pin-drain_load", "50");
    browser.wait(
        "the verdict",
        "return document.querySelector('[data-test=summary]').textContent.startsWith('Not yet')",
    );
    browser.press("free-all");
    browser.type_into("pin-series_capacitor", "100p");
    let solved = native(&browser);
    assert!((solved.values.series_capacitor.c_f / 100e-12 - 1.0).abs() < 1e-12);
    assert!(
        solved.figures.turn_on_v.abs() < 1e-3,
        "soft switching is kept around the pinned part"
    );
    same_digits(&browser, &solved);
    let address = browser.script("return location.href");
    let other = Browser::start("other");
    other.open(address.as_str().expect("an address"));
    other.wait("the page", READY);
    same_digits(&other, &solved);
}

#[test]
fn damaged_storage_and_broken_links_lose_nothing() {
    let site = page();
    let browser = Browser::start("storage");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.type_into("field-name", "kept");
    browser.press("save");
    browser.script("localStorage.setItem('evenfall/1/design/broken', '{\"half')");
    browser.open(&format!("{}#e=1&v=hostile&p=<b>", site.address));
    browser.reload();
    browser.wait("the page", READY);
    let body = browser.script("return document.body.innerText");
    let body = body.as_str().expect("text");
    assert!(
        body.contains("v=hostile") && body.contains("cannot be read") && body.contains("kept"),
        "{body}"
    );
    let left = browser.script("return localStorage.getItem('evenfall/1/design/broken')");
    assert_eq!(left.as_str(), Some("{\"half"));
}

#[test]
fn the_page_works_without_a_network_after_the_first_visit() {
    let site = page();
    let browser = Browser::start("offline");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.wait(
        "the service worker",
        "return !!navigator.serviceWorker.controller",
    );
    site.go_offline();
    browser.reload();
    browser.wait("the page", READY);
    same_digits(&browser, &native(&browser));
}

#[test]
fn the_whole_page_is_sent_in_300_kilobytes() {
    let mut total = 0;
    for entry in std::fs::read_dir(dist()).expect("dist") {
        let mut compressed = Vec::new();
        let bytes = std::fs::read(entry.expect("a file").path()).expect("its content");
        let settings = brotli::enc::BrotliEncoderParams {
            quality: 11,
            ..Default::default()
        };
        brotli::BrotliCompress(&mut bytes.as_slice(), &mut compressed, &settings)
            .expect("compressed");
        total += compressed.len();
    }
    assert!(
        total > 100_000 && total <= 300_000,
        "{total} bytes as brotli"
    );
}

#[test]
fn every_starting_design_opens_without_a_fault() {
    let site = page();
    let browser = Browser::start("starts");
    browser.open(&site.address);
    browser.wait("the page", READY);
    let count =
        browser.script("return document.querySelectorAll('[data-test=start] option').length");
    let count = count.as_u64().expect("a number");
    assert_eq!(count, 6);
    for index in 1..count {
        browser.script(&format!(
            "const s = document.querySelector('[data-test=start]'); s.selectedIndex = {index}; s.dispatchEvent(new Event('change', {{bubbles: true}}))"
        ));
        let solved = native(&browser);
        same_digits(&browser, &solved);
        assert!(
            !browser.text("summary").starts_with("No such stage"),
            "design {index}: {}",
            browser.text("summary")
        );
    }
    assert_eq!(browser.console_errors(), Vec::<String>::new());
}

#[test]
fn the_keyboard_steps_values_and_reads_the_scope() {
    let site = page();
    let browser = Browser::start("keys");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.send_keys("field-supply", "\u{E013}");
    assert_eq!(
        browser.script("return document.querySelector('[data-test=field-supply]').value"),
        "48.48 V"
    );
    browser.send_keys("traces", "\u{E014}\u{E014}");
    assert!(
        browser.text("readout").starts_with("at 576"),
        "{}",
        browser.text("readout")
    );
}

#[test]
fn blocked_storage_is_said_and_stops_nothing() {
    let site = page();
    let browser = Browser::start_without_storage("blocked");
    browser.open(&site.address);
    browser.wait("the page", READY);
    let body = browser.script("return document.body.innerText");
    assert!(
        body.as_str().is_some_and(|t| t.contains("blocks storage")),
        "{body}"
    );
    browser.type_into("field-supply", "40");
    same_digits(&browser, &native(&browser));
    browser.press("save");
    browser.wait(
        "the message",
        "return document.querySelector('[data-test=shelf-message]').textContent.includes('link')",
    );
}

#[test]
fn a_deleted_design_comes_back() {
    let site = page();
    let browser = Browser::start("undo");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.type_into("field-name", "to be kept");
    browser.press("save");
    let stored = "return localStorage.getItem('evenfall/1/design/to be kept') !== null";
    browser.wait("the entry", stored);
    browser.script("[...document.querySelectorAll('.shelf button')].find(b => b.textContent === 'delete').click()");
    assert_eq!(browser.script(stored), false);
    browser.wait(
        "undo",
        "return !!document.querySelector('[data-test=undo]')",
    );
    browser.press("undo");
    browser.wait("the entry again", stored);
}

/// Not an assertion on time: the figures go to the log, beside the native ones.
#[test]
fn the_engine_runs_in_the_browser_and_its_speed_is_logged() {
    const ROUNDS: u32 = 2000;
    let site = page();
    let browser = Browser::start("speed");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.script(
        "const glue = new URL(document.querySelector('script[data-glue]').dataset.glue, document.baseURI).href;
         window.speed = null; import(glue).then(g => { g.microseconds_a_solve(200); window.speed = [...g.microseconds_a_solve(2000)]; })",
    );
    browser.wait("the figures", "return window.speed !== null");
    let figures = browser.script("return window.speed");
    let [solve_us, sizing_us] = [0, 1].map(|k| figures[k].as_f64().expect("a number"));
    let stage = evenfall_engine::stage::Stage::example();
    let start = std::time::Instant::now();
    for _ in 0..ROUNDS {
        std::hint::black_box(std::hint::black_box(&stage).solve_to_harmonic(10)).expect("solved");
    }
    let native_us = start.elapsed().as_secs_f64() * 1e6 / f64::from(ROUNDS);
    eprintln!(
        "steady state {solve_us:.1} us in the browser, {native_us:.1} us natively in the test profile; sizing {sizing_us:.0} us"
    );
    assert!(solve_us > 0.0 && sizing_us > solve_us);
}

#[test]
fn saving_replaces_only_what_this_tab_knows() {
    let site = page();
    let browser = Browser::start("save");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.type_into("field-name", "mine");
    browser.press("save");
    browser.type_into("field-supply", "40");
    browser.press("save");
    let names = "return JSON.stringify(Object.keys(localStorage).filter(k => k.startsWith('evenfall/')).sort())";
    assert_eq!(browser.script(names), "[\"evenfall/1/design/mine\"]");
    // Another tab saves under the same name.
    browser.script("const k = 'evenfall/1/design/mine'; localStorage.setItem(k, localStorage.getItem(k).replace('40', '41'))");
    browser.press("save");
    assert_eq!(
        browser.script(names),
        "[\"evenfall/1/design/mine\",\"evenfall/1/design/mine 2\"]"
    );
}

#[test]
fn wrong_text_is_forgotten_when_another_design_is_opened() {
    let site = page();
    let browser = Browser::start("stale");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.type_into("field-supply", "4 parsnips");
    assert!(
        browser
            .script("return document.getElementById('field-supply-problem').textContent.length")
            .as_u64()
            > Some(5)
    );
    browser.script("const s = document.querySelector('[data-test=start]'); s.selectedIndex = 3; s.dispatchEvent(new Event('change', {bubbles: true}))");
    browser.wait(
        "the new supply",
        "return document.querySelector('[data-test=field-supply]').value === '24 V'",
    );
    assert_eq!(
        browser.script("return document.getElementById('field-supply-problem').textContent"),
        ""
    );
    // An address edited to nonsense leaves the page's design alone.
    browser.script("location.hash = 'e=1&v=nonsense'");
    browser.wait(
        "the notice",
        "return document.querySelector('.notices').textContent.includes('stays')",
    );
    assert_eq!(
        browser.script("return document.querySelector('[data-test=field-supply]').value"),
        "24 V"
    );
}

#[test]
fn a_loaded_q_study_is_drawn_and_its_best_point_taken_over() {
    let site = page();
    let browser = Browser::start("study");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.press("studies");
    browser.wait("the study", "return document.querySelector('[data-test=study-verdict]').textContent.startsWith('Every limit is met')");
    assert_eq!(
        browser.script("return document.querySelectorAll('.study path').length"),
        5
    );
    browser.press("study-take");
    let solved = native(&browser);
    assert!(
        solved.figures.loaded_q > 5.0 && solved.figures.loaded_q < 7.0,
        "{}",
        solved.figures.loaded_q
    );
    assert!(solved.verdicts.iter().all(|v| v.met));
    same_digits(&browser, &solved);
    // A load study of the parts as they are.
    browser.script("const s = document.querySelector('[data-test=study-kind]'); s.value = '2'; s.dispatchEvent(new Event('change', {bubbles: true}))");
    browser.wait("the load study", "return [...document.querySelectorAll('.study + p')].some(p => p.textContent.includes('Ω'))");
    assert_eq!(browser.console_errors(), Vec::<String>::new());
}

#[test]
fn a_phone_needs_no_sideways_scrolling() {
    let site = page();
    let browser = Browser::start("phone");
    browser.open(&site.address);
    browser.wait("the page", READY);
    for width in [360, 768] {
        browser.narrow_to(width);
        browser.press("studies");
        browser.wait(
            "the width",
            &format!("return window.innerWidth === {width}"),
        );
        let fits =
            browser.script("return document.documentElement.scrollWidth <= window.innerWidth");
        assert_eq!(fits, true, "at {width} pixels");
    }
}

#[test]
fn a_pinned_part_keeps_its_resistance_while_it_is_retyped() {
    let site = page();
    let browser = Browser::start("retype");
    browser.open(&site.address);
    browser.wait("the page", READY);
    browser.type_into("pin-feed", "2.5u");
    browser.wait(
        "its resistance",
        "return !!document.querySelector('[data-test=field-esr-feed]')",
    );
    browser.type_into("field-esr-feed", "40m");
    // Deleted to the last letter, then typed anew.
    browser.send_keys(
        "pin-feed",
        "\u{E010}\u{E003}\u{E003}\u{E003}\u{E003}\u{E003}\u{E003}\u{E003}\u{E003}\u{E003}3u",
    );
    let solved = native(&browser);
    assert_eq!(solved.values.feed.l_h, 3e-6);
    assert_eq!(solved.values.feed.esr_ohm, Some(0.04));
    // Emptied and left, it is free.
    browser.type_into("pin-feed", "\u{E003}\u{E004}");
    browser.wait(
        "freedom",
        "return !document.querySelector('[data-test=field-esr-feed]')",
    );
}
