//! A drawing surface four times finer than the canvas's own pixels.
//!
//! The plotting library places points on whole pixels, which makes a smooth curve wobble.
//! Here it draws on a surface four times as large, and the canvas scales that down.

use plotters_backend::{
    BackendColor, BackendCoord, BackendStyle, DrawingBackend, DrawingErrorKind,
};
use plotters_canvas::CanvasBackend;
use wasm_bindgen::JsCast;

/// How much finer.
pub(crate) const FINER: f64 = 4.0;

/// The finer surface.
pub(crate) struct Fine {
    inner: CanvasBackend,
}

type Drawn = Result<(), DrawingErrorKind<<CanvasBackend as DrawingBackend>::ErrorType>>;

impl Fine {
    /// Scales the canvas's context down; none where the canvas has no context.
    pub(crate) fn on(canvas: &web_sys::HtmlCanvasElement) -> Option<Self> {
        let context = canvas.get_context("2d").ok()??;
        let context: web_sys::CanvasRenderingContext2d = context.dyn_into().ok()?;
        context.scale(1.0 / FINER, 1.0 / FINER).ok()?;
        Some(Self {
            inner: CanvasBackend::with_canvas_object(canvas.clone())?,
        })
    }
}

impl DrawingBackend for Fine {
    type ErrorType = <CanvasBackend as DrawingBackend>::ErrorType;

    fn get_size(&self) -> (u32, u32) {
        let (width, height) = self.inner.get_size();
        (width * FINER as u32, height * FINER as u32)
    }

    fn ensure_prepared(&mut self) -> Drawn {
        self.inner.ensure_prepared()
    }

    fn present(&mut self) -> Drawn {
        self.inner.present()
    }

    fn draw_pixel(&mut self, point: BackendCoord, color: BackendColor) -> Drawn {
        self.inner.draw_pixel(point, color)
    }

    fn draw_line<S: BackendStyle>(
        &mut self,
        from: BackendCoord,
        to: BackendCoord,
        style: &S,
    ) -> Drawn {
        self.inner.draw_line(from, to, style)
    }

    fn draw_path<S: BackendStyle, I: IntoIterator<Item = BackendCoord>>(
        &mut self,
        path: I,
        style: &S,
    ) -> Drawn {
        self.inner.draw_path(path, style)
    }

    fn draw_circle<S: BackendStyle>(
        &mut self,
        center: BackendCoord,
        radius: u32,
        style: &S,
        fill: bool,
    ) -> Drawn {
        self.inner.draw_circle(center, radius, style, fill)
    }
}
