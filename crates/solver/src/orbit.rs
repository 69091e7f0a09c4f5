//! The periodic steady state, without time stepping.
//!
//! Between events a stage is linear, so its solution is a matrix exponential (`flow`).
//! [`solve`] finds the state that repeats after one period by Newton's method on the
//! period map, whose derivative is exact, the instants at which diodes start and stop
//! included; `meter` reads means, products, peaks and spectra off the solution.

mod curved;
mod flow;
mod guards;
mod meter;
mod mirror;
mod shoot;

use crate::circuit::Circuit;
use crate::dynamics::DynamicsError;
use mirror::{Halved, Mirror};
use num_complex::Complex64;
use std::f64::consts::TAU;
use std::fmt;

/// What can be read off a solved circuit.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Probe {
    /// Voltage of a branch, volts.
    Voltage(usize),
    /// Current of a branch, amperes.
    Current(usize),
}

/// A stretch of the period with fixed switches.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ClockStep {
    /// How long, seconds.
    pub duration_s: f64,
    /// The switches that the clock closes, as bits of [`Circuit::switching_branches`].
    pub closed: u32,
}

/// Lowest and highest value over the period, and when.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Extremes {
    /// Lowest value.
    pub least: f64,
    /// When, seconds from the start of the period.
    pub least_at_s: f64,
    /// Highest value.
    pub greatest: f64,
    /// When, seconds from the start of the period.
    pub greatest_at_s: f64,
}

/// Why there is no periodic state.
#[derive(Debug, Clone, PartialEq)]
pub enum OrbitError {
    /// The circuit has no equations.
    Dynamics(DynamicsError),
    /// The two sides of the circuit do not take each other's place.
    Sides,
    /// A clock step of no or unending duration.
    Clock {
        /// The duration at fault, seconds.
        duration_s: f64,
    },
    /// A state neither decays nor is driven: no single periodic state exists.
    Undetermined,
    /// Diodes start and stop without end within one clock step.
    Chatter {
        /// Events counted before giving up.
        events: usize,
    },
    /// A stretch needs more steps than are made.
    TooManySteps {
        /// Steps made before giving up.
        steps: usize,
    },
    /// Newton's method did not settle.
    NotConverged {
        /// Iterations made.
        iterations: usize,
        /// Largest change of a state over the period, relative to that state.
        residual: f64,
    },
    /// The numbers left the range of double precision.
    Overflow,
}

impl fmt::Display for OrbitError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Dynamics(error) => error.fmt(f),
            Self::Clock { duration_s } => {
                write!(f, "a clock step of {duration_s} s cannot be solved")
            }
            Self::Sides => write!(f, "the two sides of the circuit are not alike"),
            Self::Undetermined => {
                write!(
                    f,
                    "no single steady state exists: some charge or current neither decays nor is driven"
                )
            }
            Self::Chatter { events } => {
                write!(
                    f,
                    "a diode started and stopped more than {events} times within one clock step"
                )
            }
            Self::TooManySteps { steps } => write!(
                f,
                "the charge of a voltage-dependent capacitance could not be followed in {steps} steps"
            ),
            Self::NotConverged {
                iterations,
                residual,
            } => write!(
                f,
                "the steady state did not settle in {iterations} iterations (relative change {residual:.1e} a period)"
            ),
            Self::Overflow => write!(f, "the values are too far apart for double precision"),
        }
    }
}

impl std::error::Error for OrbitError {}

impl From<DynamicsError> for OrbitError {
    fn from(error: DynamicsError) -> Self {
        Self::Dynamics(error)
    }
}

/// The piece of an orbit that ends nearest to a time.
fn ending<P>(pieces: &[P], time_s: f64, end_s: impl Fn(&P) -> f64) -> Option<&P> {
    let gap = |piece: &P| (end_s(piece) - time_s).abs();
    pieces.iter().rev().min_by(|a, b| gap(a).total_cmp(&gap(b)))
}

/// A solved periodic state. The period starts with the first clock step.
pub trait Orbit {
    /// The period, seconds.
    fn period_s(&self) -> f64;
    /// Newton iterations that it took.
    fn iterations(&self) -> usize;
    /// Number of stretches between events.
    fn pieces(&self) -> usize;
    /// The state at the period's start: voltages of the capacitors, currents of the coils.
    fn start(&self) -> Vec<f64>;
    /// The greatest magnitude of each state that was met.
    fn sizes(&self) -> Vec<f64>;
    /// Mean of the product of two quantities (of one with itself: its mean square).
    fn mean_product(&self, first: Probe, second: Probe) -> f64;
    /// Mean of a quantity.
    fn mean(&self, probe: Probe) -> f64;
    /// Lowest and highest value.
    fn extremes(&self, probe: Probe) -> Extremes;
    /// Complex Fourier coefficients 0..=count of each quantity: mean of x(t) exp(-j k w t).
    fn harmonics(&self, probes: &[Probe], count: usize) -> Vec<Vec<Complex64>> {
        self.fourier(probes, count, TAU / self.period_s())
    }
    /// The same means at multiples of any angular frequency, radians per second.
    fn fourier(&self, probes: &[Probe], count: usize, omega: f64) -> Vec<Vec<Complex64>>;
    /// Value and slope (per second) just before the clock's instant nearest to a time, seconds
    /// from the start of the period.
    fn before(&self, probe: Probe, time_s: f64) -> (f64, f64);
    /// Value and slope (per second) just before the period ends.
    fn before_end(&self, probe: Probe) -> (f64, f64) {
        self.before(probe, self.period_s())
    }
    /// `count + 1` samples of each quantity at equal steps from the period's start to its end.
    fn samples(&self, probes: &[Probe], count: usize) -> Vec<Vec<f64>>;
    /// Fraction of the period in which a switching branch conducts.
    fn conducting_fraction(&self, branch: usize) -> f64;
    /// Energy that charge lost in jumps at the clock's instants in one period, joules
    /// (only ideal switches make jumps).
    fn jump_energy_j(&self) -> f64;
}

/// The periodic steady state of `circuit` under the clock.
///
/// # Errors
/// See [`OrbitError`].
pub fn solve(circuit: &Circuit, clock: &[ClockStep]) -> Result<Box<dyn Orbit>, OrbitError> {
    solve_with(circuit, clock, None)
}

/// The periodic steady state of a circuit with two like sides half a period apart, from the
/// clock of the first half. For each branch `partners` has the branch whose place it takes in
/// the second half, and the sign of its voltage and current there.
///
/// # Errors
/// See [`OrbitError`].
pub fn solve_halves(
    circuit: &Circuit,
    clock: &[ClockStep],
    partners: &[(usize, f64)],
) -> Result<Box<dyn Orbit>, OrbitError> {
    let mirror = Mirror::of(circuit, partners).ok_or(OrbitError::Sides)?;
    let half = solve_with(circuit, clock, Some(&mirror))?;
    Ok(Box::new(Halved { half, mirror }))
}

fn solve_with(
    circuit: &Circuit,
    clock: &[ClockStep],
    mirror: Option<&Mirror>,
) -> Result<Box<dyn Orbit>, OrbitError> {
    if circuit.varying().next().is_some() {
        return Ok(Box::new(curved::solve(circuit, clock, mirror)?));
    }
    macro_rules! sized {
        ($($n:literal),*) => {
            match circuit.state_count() + 1 {
                $(n if n <= $n => Ok(Box::new(shoot::solve::<$n>(circuit, clock, mirror)?) as Box<dyn Orbit>),)*
                _ => Ok(Box::new(curved::solve(circuit, clock, mirror)?)),
            }
        };
    }
    sized!(5, 10)
}
