//! Curves on a canvas, drawn anew whenever the page's width, theme or printing changes.

use crate::fine::{FINER, Fine};
use leptos::prelude::*;
use plotters::coord::types::RangedCoordf64;
use plotters::prelude::*;
use wasm_bindgen::JsCast;
use wasm_bindgen::closure::Closure;
use web_sys::{CanvasRenderingContext2d, HtmlCanvasElement};

/// What the plots are seen on.
#[derive(Clone, Copy)]
pub(crate) struct Sight {
    changes: RwSignal<u32>,
    printing: RwSignal<bool>,
}

impl Sight {
    /// Follows the window.
    pub(crate) fn new() -> Self {
        let changes = RwSignal::new(0u32);
        let printing = RwSignal::new(false);
        let change = move || changes.update(|n| *n += 1);
        let resize = window_event_listener(leptos::ev::resize, move |_| change());
        // Paper is light whatever the screen is; a change of theme draws anew too.
        let before = window_event_listener(leptos::ev::beforeprint, move |_| printing.set(true));
        let after = window_event_listener(leptos::ev::afterprint, move |_| printing.set(false));
        if let Some(theme) = theme() {
            let redraw = Closure::<dyn FnMut()>::new(change);
            theme.set_onchange(Some(redraw.as_ref().unchecked_ref()));
            // It lives as long as the page does.
            redraw.forget();
        }
        on_cleanup(move || {
            resize.remove();
            before.remove();
            after.remove();
        });
        Self { changes, printing }
    }

    /// Whether to draw for a dark ground; whoever asks is told of every change.
    pub(crate) fn is_dark(self) -> bool {
        self.changes.track();
        !self.printing.get() && theme().is_some_and(|m| m.matches())
    }
}

fn theme() -> Option<web_sys::MediaQueryList> {
    window()
        .match_media("(prefers-color-scheme: dark)")
        .ok()
        .flatten()
}

/// Colour of axes and marks.
pub(crate) fn ink(dark: bool) -> RGBColor {
    if dark {
        RGBColor(150, 160, 164)
    } else {
        RGBColor(120, 116, 106)
    }
}

/// A canvas with its coordinates.
pub(crate) struct Plane {
    area: DrawingArea<Fine, Cartesian2d<RangedCoordf64, RangedCoordf64>>,
    context: CanvasRenderingContext2d,
    scale: f64,
}

impl Plane {
    /// An empty plane of this height in CSS pixels; none where the canvas has no context.
    pub(crate) fn on(
        canvas: &HtmlCanvasElement,
        height: f64,
        (left, right): (f64, f64),
        (low, high): (f64, f64),
    ) -> Option<Self> {
        let ratio = window().device_pixel_ratio().max(1.0);
        let width = f64::from(canvas.client_width()).max(120.0);
        canvas.set_width((width * ratio) as u32);
        canvas.set_height((height * ratio) as u32);
        let scale = ratio * FINER;
        let margin = (4.0 * scale) as i32;
        let area = Fine::on(canvas)?.into_drawing_area();
        let area = area.margin(margin, margin, margin, margin);
        let (x, y) = area.get_pixel_range();
        let pixels = (x.start..x.end - 1, y.end - 1..y.start);
        let axes =
            Cartesian2d::<RangedCoordf64, RangedCoordf64>::new(left..right, low..high, pixels);
        let context = canvas.get_context("2d").ok()??.dyn_into().ok()?;
        Some(Self {
            area: area.apply_coord_spec(axes),
            context,
            scale,
        })
    }

    /// A line through points, so many CSS pixels wide.
    pub(crate) fn line(
        &self,
        points: Vec<(f64, f64)>,
        colour: RGBAColor,
        width: f64,
    ) -> Option<()> {
        let style = colour.stroke_width((width * self.scale) as u32);
        self.area.draw(&PathElement::new(points, style)).ok()
    }

    /// A dot.
    pub(crate) fn dot(&self, at: (f64, f64), colour: RGBColor) -> Option<()> {
        let radius = (3.5 * self.scale) as i32;
        self.area
            .draw(&Circle::new(at, radius, colour.filled()))
            .ok()
    }

    /// Words at a point.
    pub(crate) fn words(&self, at: (f64, f64), words: &str, colour: RGBColor, side: Side) {
        let (x, y) = self.area.map_coordinate(&at);
        let RGBColor(r, g, b) = colour;
        let (align, right, down) = match side {
            Side::Right => ("start", 8.0, -3.0),
            Side::Above => ("end", 0.0, -5.0),
            Side::Below => ("end", 0.0, 15.0),
        };
        self.context
            .set_fill_style_str(&format!("rgb({r},{g},{b})"));
        self.context
            .set_font(&format!("{}px system-ui,sans-serif", 12.0 * self.scale));
        self.context.set_text_align(align);
        let (x, y) = (
            f64::from(x) + right * self.scale,
            f64::from(y) + down * self.scale,
        );
        // Words that cannot be drawn stand beneath the plot too.
        let _ = self.context.fill_text(words, x, y);
    }
}

/// Where words stand: to the right of their point, or ending at it above or below.
#[derive(Clone, Copy)]
pub(crate) enum Side {
    /// To its right.
    Right,
    /// Above, ending there.
    Above,
    /// Below, ending there.
    Below,
}
