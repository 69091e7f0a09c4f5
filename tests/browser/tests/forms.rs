//! The form of the stage on the page: pairs, stacks, widths, and other ways to meet a brief.

use evenfall_browser_tests::{Browser, READY, page};
use evenfall_engine::design::{Feed, Form};
use evenfall_engine::{answer::Answer, solve};

fn choose(browser: &Browser, test: &str, value: &str) {
    browser.script(&format!(
        "const s = document.querySelector('[data-test=\"{test}\"]'); s.value = '{value}'; s.dispatchEvent(new Event('change', {{bubbles: true}}))"
    ));
}

fn text(browser: &Browser, selector: &str) -> String {
    let script = format!("return document.querySelector('{selector}')?.innerText ?? ''");
    let text = browser.script(&script);
    text.as_str().unwrap_or_default().to_owned()
}

#[test]
fn changing_the_form_keeps_the_brief_and_shows_each_switch() {
    let site = page();
    let browser = Browser::start("form");
    browser.open(&format!(
        "{}#e=1&ron=0.12&ck=constant&c=20e-12&ql=200&rv=250",
        site.address
    ));
    browser.wait("the page", READY);
    let before = browser.design();
    choose(&browser, "field-form", "differential");
    browser.wait(
        "both sides",
        "return document.querySelectorAll('[data-test=sides] tbody tr').length === 2",
    );
    let pair = browser.design();
    assert_eq!(pair.stage.form, Form::Differential);
    assert_eq!(pair.brief, before.brief);
    assert_eq!(pair.device, before.device);
    // What stands on the page is what the engine says.
    let Answer::Solved(solved) = solve(&pair) else {
        panic!("refused");
    };
    let peak = evenfall_engine::quantity::format(solved.detail.sides[1].drain_peak_v, "V");
    assert!(text(&browser, "[data-test=sides]").contains(&peak));
    assert!(text(&browser, "[data-test=common]").contains("cancels"));
    browser.script("const f = document.querySelector('[data-test=\"field-mismatch_duty\"]'); f.value = '0.02'; f.dispatchEvent(new Event('input', {bubbles: true}))");
    browser.wait(
        "what leaks",
        "return document.querySelector('[data-test=common]').innerText.includes('leak into')",
    );
    choose(&browser, "field-form", "single");
    browser.wait(
        "one switch",
        "return !document.querySelector('[data-test=sides]')",
    );
}

#[test]
fn a_stack_that_cannot_be_is_refused_and_one_that_can_is_shown() {
    let site = page();
    let browser = Browser::start("stack");
    let address = format!(
        "{}#e=1&ron=0.12&ck=constant&c=20e-12&ql=200&rv=250&device.node_f=8e-12",
        site.address
    );
    browser.open(&address);
    browser.wait("the page", READY);
    let set = |value: &str| {
        browser.script(&format!("const f = document.querySelector('[data-test=\"field-stack\"]'); f.value = '{value}'; f.dispatchEvent(new Event('input', {{bubbles: true}}))"));
    };
    set("2.5");
    browser.wait(
        "the refusal",
        "return document.querySelector('[data-test=summary]').innerText.includes('1 to 4 switches')",
    );
    assert!(text(&browser, "[data-test=refused-stack]").contains("1 to 4 switches"));
    set("2");
    browser.wait(
        "the stack",
        "return document.querySelectorAll('[data-test=stack] tbody tr').length === 2",
    );
    assert!(text(&browser, ".ledger").contains("drain voltage of switch 2"));
}

#[test]
fn other_ways_are_compared_and_taken_over() {
    let site = page();
    let browser = Browser::start("ways");
    browser.open(&format!(
        "{}#e=1&ron=0.12&ck=constant&c=20e-12&ql=200&rv=250",
        site.address
    ));
    browser.wait("the page", READY);
    browser.script("document.querySelector('[data-test=compare-ways]').click()");
    browser.wait(
        "five ways",
        "return document.querySelectorAll('[data-test=ways] tbody tr').length === 5",
    );
    let all = text(&browser, "[data-test=ways]");
    for way in [
        "choke feed (this stage)",
        "X = 0",
        "load-independent",
        "trap at 2 f",
        "differential",
    ] {
        assert!(all.contains(way), "{way} in {all}");
    }
    browser.script("[...document.querySelectorAll('[data-test=take-way]')].find(b => b.getAttribute('aria-label').includes('X = 0')).click()");
    let taken = browser.design();
    assert_eq!(taken.stage.feed, Feed::Parallel {});
    assert_eq!(taken.brief.power_w, Some(60.0));
}

#[test]
fn a_switch_known_by_its_width_says_what_sets_it() {
    let site = page();
    let browser = Browser::start("width");
    browser.open(&format!(
        "{}#e=1&f=433.92e6&p=0.1&v=1.2&q=4&fk=resonant&fq=1.2&ql=12&device.gate_drive_v=1.2",
        site.address
    ));
    browser.wait("the page", READY);
    choose(&browser, "field-known", "width");
    browser.wait(
        "the width",
        "return document.body.innerText.includes('wide: conduction loses')",
    );
    assert!(
        browser
            .script("return !document.querySelector('[data-test=\"field-on_resistance\"]')")
            .as_bool()
            == Some(true)
    );
}
