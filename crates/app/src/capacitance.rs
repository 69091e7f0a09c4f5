//! The switch's output capacitance: its kind, its fields, pasted points, and the curve.

use crate::fields::{Quantity, fields};
use crate::pieces::{choice, list, live, one_of, typed};
use crate::plot::{Plane, Side, ink};
use crate::points;
use crate::state::App;
use evenfall_engine::charge::{ChargeLaw, LawError};
use evenfall_engine::design::Capacitance;
use evenfall_engine::quantity;
use leptos::html::Canvas;
use leptos::prelude::*;
use plotters::style::{Color, RGBColor};

/// The kinds: name in the design file and plain words.
const KINDS: [(&str, &str); 4] = [
    ("none", "none"),
    ("constant", "constant"),
    ("junction", "junction law"),
    ("points", "datasheet points"),
];

static CONSTANT: [Quantity; 1] = [Quantity::needed(
    "capacitance",
    "Output capacitance",
    "F",
    (
        |d| match d.device.capacitance {
            Capacitance::Constant { c_f } => Some(c_f),
            _ => None,
        },
        |d, v| {
            if let (Capacitance::Constant { c_f }, Some(v)) = (&mut d.device.capacitance, v) {
                *c_f = v;
            }
        },
    ),
)
.hint("Of the switch itself; the shunt capacitor is sized beside it.")];

/// A number of the junction law.
macro_rules! junction {
    ($place:ident) => {
        (
            |d| match d.device.capacitance {
                Capacitance::Junction { $place, .. } => Some($place),
                _ => None,
            },
            |d, v| {
                if let (Capacitance::Junction { $place, .. }, Some(v)) =
                    (&mut d.device.capacitance, v)
                {
                    *$place = v;
                }
            },
        )
    };
}

static JUNCTION: [Quantity; 3] = [
    Quantity::needed("cj0", "Capacitance at 0 V, Cj0", "F", junction!(cj0_f)),
    Quantity::needed("built_in", "Built-in potential", "V", junction!(built_in_v))
        .hint("About 0.8 V in silicon."),
    Quantity::needed("grading", "Grading exponent", "", junction!(grading))
        .hint("C = Cj0 / (1 + v/Vbi)^m: 0.5 for an abrupt junction, a third for a graded one."),
];

fn kind_of(capacitance: &Capacitance) -> usize {
    match capacitance {
        Capacitance::None => 0,
        Capacitance::Constant { .. } => 1,
        Capacitance::Junction { .. } => 2,
        Capacitance::Points { .. } => 3,
    }
}

/// The charge law of a capacitance that depends on voltage.
fn law_of(capacitance: &Capacitance) -> Option<Result<ChargeLaw, LawError>> {
    match capacitance {
        Capacitance::Junction {
            cj0_f,
            built_in_v,
            grading,
        } => Some(ChargeLaw::junction(*cj0_f, *built_in_v, *grading)),
        Capacitance::Points { v, c_f } => Some(ChargeLaw::points(v, c_f)),
        _ => None,
    }
}

/// A capacitance of another kind with the same energy at `peak_v`, so that the stage stays
/// about as it is until the datasheet's own values are typed.
fn as_kind(kind: usize, old: &Capacitance, peak_v: f64) -> Capacitance {
    const BUILT_IN_V: f64 = 0.8;
    const GRADING: f64 = 0.5;
    const FIRST_F: f64 = 100e-12;
    let four_digits = |value: f64, unit: &str| {
        quantity::parse(&quantity::format(value, unit), unit).unwrap_or(value)
    };
    let old_law = law_of(old).and_then(Result::ok);
    let constant_f = match old {
        Capacitance::Constant { c_f } if *c_f > 0.0 => *c_f,
        _ => old_law
            .as_ref()
            .map_or(FIRST_F, |law| law.energy_equivalent_f(peak_v)),
    };
    let junction = || {
        let one = ChargeLaw::junction(FIRST_F, BUILT_IN_V, GRADING).ok()?;
        Some(FIRST_F * constant_f / one.energy_equivalent_f(peak_v))
    };
    match kind {
        0 => Capacitance::None,
        1 => Capacitance::Constant {
            c_f: four_digits(constant_f, "F"),
        },
        2 => Capacitance::Junction {
            cj0_f: four_digits(junction().unwrap_or(constant_f), "F"),
            built_in_v: BUILT_IN_V,
            grading: GRADING,
        },
        _ => {
            let shares = [0.0, 0.02, 0.05, 0.1, 0.2, 0.4, 0.7, 1.0];
            let v: Vec<f64> = shares.map(|s| four_digits(s * peak_v, "V")).to_vec();
            let at = |v: &f64| old_law.as_ref().map_or(constant_f, |law| law.at(*v).0);
            Capacitance::Points {
                c_f: v.iter().map(|v| four_digits(at(v), "F")).collect(),
                v,
            }
        }
    }
}

/// What stays on the page while kinds change: the last capacitance of each kind, and the rows
/// as they were pasted.
#[derive(Clone, Copy)]
struct Kept {
    each: StoredValue<[Option<Capacitance>; 4]>,
    text: RwSignal<Option<String>>,
    wrong: RwSignal<Vec<String>>,
}

impl Kept {
    fn new(app: App) -> Self {
        let kept = Self {
            each: StoredValue::new([const { None }; 4]),
            text: RwSignal::new(None),
            wrong: RwSignal::new(Vec::new()),
        };
        // They belong to the design that was open before.
        Effect::new(move |_| {
            app.opened.track();
            kept.each.set_value([const { None }; 4]);
            kept.text.set(None);
            kept.wrong.set(Vec::new());
        });
        kept
    }

    fn choose(self, app: App, kind: usize) {
        let peak_v = app.last.with_untracked(|s| {
            let peak = s.as_ref().map(|s| s.figures.drain_peak_v);
            peak.filter(|v| *v > 0.0).unwrap_or(100.0)
        });
        app.design.update(|d| {
            let old = std::mem::take(&mut d.device.capacitance);
            let before = self.each.with_value(|each| each[kind].clone());
            d.device.capacitance = before.unwrap_or_else(|| as_kind(kind, &old, peak_v));
            let place = kind_of(&old);
            self.each.update_value(|each| each[place] = Some(old));
        });
    }

    fn type_points(self, app: App, text: String) {
        match points::read(&text) {
            Ok((v, c_f)) => {
                self.wrong.set(Vec::new());
                let table = Capacitance::Points { v, c_f };
                if app.design.with_untracked(|d| d.device.capacitance != table) {
                    app.design.update(|d| d.device.capacitance = table);
                }
            }
            Err(wrong) => self.wrong.set(wrong),
        }
        self.text.set(Some(text));
    }
}

fn points_field(app: App, kept: Kept) -> AnyView {
    let shown = move || {
        kept.text.get().unwrap_or_else(|| {
            app.design.with(|d| match &d.device.capacitance {
                Capacitance::Points { v, c_f } => points::write(v, c_f),
                _ => String::new(),
            })
        })
    };
    let wrong = list(move || {
        const SHOWN: usize = 5;
        let all = kept.wrong.get();
        let more = all.len().saturating_sub(SHOWN);
        let mut lines: Vec<String> = all.into_iter().take(SHOWN).collect();
        if more > 0 {
            lines.push(format!("{more} more lines are wrong."));
        }
        if !lines.is_empty() {
            lines.push("The last good table is kept.".to_owned());
        }
        lines
            .into_iter()
            .map(|text| view! { <span>{text}</span> }.into_any())
            .collect()
    });
    let invalid = live(move || kept.wrong.with(|w| !w.is_empty()).to_string());
    view! {
        <span class="field whole">
            <label for="field-points">"Volts and farads, one pair a line: 25 120p (paste two columns)"</label>
            <textarea id="field-points" data-test="field-points" rows="6" spellcheck="false" autocomplete="off"
                aria-describedby="field-points-problem" aria-invalid=invalid
                prop:value=live(shown)
                on:input=typed(move |text| kept.type_points(app, text))></textarea>
            <span class="problem lines" id="field-points-problem" role="status">{wrong}</span>
        </span>
    }
    .into_any()
}

/// The fields of the capacitance, and its curve where it depends on voltage.
pub(crate) fn capacitance(app: App) -> (AnyView, AnyView) {
    let kept = Kept::new(app);
    let kind = move || app.design.with(|d| kind_of(&d.device.capacitance));
    let options = KINDS.map(|(value, words)| (value.to_owned(), words));
    let choose = move |wanted: String| {
        if let Some(kind) = KINDS.iter().position(|(name, _)| *name == wanted) {
            kept.choose(app, kind);
        }
    };
    let own = one_of(kind, move |kind| match kind {
        1 => fields(app, &CONSTANT),
        2 => fields(app, &JUNCTION),
        3 => points_field(app, kept),
        _ => ().into_any(),
    });
    let curve = one_of(
        move || usize::from(kind() > 1),
        move |varies| {
            if varies == 1 {
                curve(app)
            } else {
                ().into_any()
            }
        },
    );
    let now = move || KINDS[kind()].0.to_owned();
    let label = "Output capacitance is";
    let choice = choice(
        "field-capacitance_kind",
        label,
        &options,
        now,
        Box::new(choose),
    );
    let refused = live(move || app.refused("capacitance_at"));
    let own = view! {
        <span class="field">
            {choice}
            <span class="problem" role="status" data-test="refused-capacitance_at">{refused}</span>
        </span>
        {own}
    };
    (own.into_any(), curve.into_any())
}

/// The curve over the drain's voltage and the constant that holds the same energy.
struct Curve {
    law: ChargeLaw,
    peak_v: f64,
    equal_f: f64,
}

/// Of the stage that is shown.
fn shown_curve(app: App) -> Option<Curve> {
    let peak_v = app.last.get()?.figures.drain_peak_v;
    let law = app
        .shown
        .with(|d| law_of(&d.device.capacitance))
        .and_then(Result::ok)?;
    (peak_v > 0.0).then(|| Curve {
        equal_f: law.energy_equivalent_f(peak_v),
        law,
        peak_v,
    })
}

fn curve(app: App) -> AnyView {
    let canvas: NodeRef<Canvas> = NodeRef::new();
    Effect::new(move |_| {
        let (Some(canvas), Some(curve)) = (canvas.get(), shown_curve(app)) else {
            return;
        };
        // A canvas without a context leaves the words beneath it to speak.
        let _ = draw(&canvas, &curve, app.sight.is_dark());
    });
    let said = Memo::new(move |_| {
        shown_curve(app).map_or_else(String::new, |c| {
            let farad = |f: f64| quantity::format(f, "F");
            format!(
                "{} at 0 V, {} at the drain's peak of {}; a constant {} holds the same energy there.",
                farad(c.law.at(0.0).0),
                farad(c.law.at(c.peak_v).0),
                quantity::format(c.peak_v, "V"),
                farad(c.equal_f)
            )
        })
    });
    view! {
        <figure class="curve">
            <figcaption><b>"Output capacitance"</b>" over the drain voltage, logarithmic"</figcaption>
            <canvas class="tall" node_ref=canvas role="img" aria-label="Output capacitance over the drain voltage" aria-describedby="curve-said"></canvas>
            <p class="origin" id="curve-said" data-test="curve">{live(move || said.get())}</p>
        </figure>
    }
    .into_any()
}

fn draw(canvas: &web_sys::HtmlCanvasElement, curve: &Curve, dark: bool) -> Option<()> {
    const HEIGHT: f64 = 150.0;
    const STEPS: usize = 160;
    let Curve {
        law,
        peak_v,
        equal_f,
    } = curve;
    let colour = if dark {
        RGBColor(140, 201, 222)
    } else {
        RGBColor(29, 84, 104)
    };
    let ink = ink(dark);
    let height_of = |farad: f64| libm::log10(farad);
    // Closer together near 0 V, where the curve is steep.
    let points: Vec<(f64, f64)> = (0..=STEPS)
        .map(|k| {
            let share = k as f64 / STEPS as f64;
            let v = peak_v * share * share;
            (v, height_of(law.at(v).0))
        })
        .collect();
    let equal = height_of(*equal_f);
    let least = points.iter().map(|p| p.1).fold(equal, f64::min);
    let most = points.iter().map(|p| p.1).fold(equal, f64::max);
    // Room for words above and below, a twentieth of a decade for a curve that is flat.
    let span = (most - least).max(0.05);
    let (low, high) = (least - 0.5 * span, most + 0.2 * span);
    let plane = Plane::on(canvas, HEIGHT, (0.0, *peak_v), (low, high))?;
    plane.line(vec![(0.0, low), (*peak_v, low)], ink.mix(1.0), 1.0)?;
    plane.line(vec![(0.0, equal), (*peak_v, equal)], ink.mix(1.0), 1.0)?;
    let (first, last) = (points[0], points[STEPS]);
    plane.line(points, colour.mix(1.0), 1.8)?;
    plane.dot(first, colour)?;
    plane.dot(last, colour)?;
    let farad = |v: f64| quantity::format(law.at(v).0, "F");
    let equal_words = format!("equal energy: {}", quantity::format(*equal_f, "F"));
    plane.words(
        first,
        &format!("{} at 0 V", farad(0.0)),
        colour,
        Side::Right,
    );
    plane.words((*peak_v, equal), &equal_words, ink, Side::Above);
    plane.words(last, &farad(*peak_v), colour, Side::Below);
    let peak = quantity::format(*peak_v, "V");
    plane.words((*peak_v, low), &peak, ink, Side::Above);
    plane.words((0.0, low), "0 V", ink, Side::Right);
    Some(())
}
