//! Random stages as built: every one has a steady state that keeps its power balance, and
//! scaling in frequency, impedance and voltage changes nothing but the units.

use evenfall_engine::design::{Diode, Load};
use evenfall_engine::stage::{Part, Stage};
use std::f64::consts::TAU;

/// Numerical Recipes' linear congruential generator (from memory), enough to scatter designs.
struct Dice(u64);

impl Dice {
    fn between(&mut self, low: f64, high: f64) -> f64 {
        self.0 = self
            .0
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        low + (high - low) * (self.0 >> 11) as f64 / (1u64 << 53) as f64
    }

    fn scattered(&mut self, low: f64, high: f64) -> f64 {
        libm::exp(self.between(libm::log(low), libm::log(high)))
    }
}

/// 200 kHz to 2.5 GHz, loaded Q 2.2 to 15, duty 0.38 to 0.58, feed 1 to 40 R, load 0.4 to
/// 2.5 times nominal, body diode present, many switching hard.
fn stage(dice: &mut Dice) -> Stage {
    let carrier_hz = dice.scattered(200e3, 2.5e9);
    let omega = TAU * carrier_hz;
    let r = dice.scattered(1.0, 50.0);
    let supply_v = dice.scattered(3.0, 100.0);
    let q = dice.between(2.2, 15.0);
    let elastance = (q - dice.between(0.9, 1.5)).max(0.2);
    let part = |value: f64, esr_ohm: f64| Part { value, esr_ohm };
    Stage {
        carrier_hz,
        duty: dice.between(0.38, 0.58),
        supply_v,
        on_resistance_ohm: r * dice.scattered(0.003, 0.1),
        fall_s: 0.0,
        device_f: 0.0,
        device_law: None,
        trap: None,
        pair: None,
        uppers: Vec::new(),
        threshold_v: 0.0,
        diode: Some(Diode {
            forward_v: dice.between(0.4, 1.0),
            slope_ohm: r * dice.between(0.001, 0.05),
        }),
        feed: part(
            dice.scattered(1.0, 40.0) * r / omega,
            r * dice.between(0.0, 0.02),
        ),
        shunt: part(
            dice.between(0.12, 0.28) / (omega * r),
            r * dice.between(0.0, 0.01),
        ),
        series_coil: part(q * r / omega, r * dice.between(0.0, 0.1)),
        series_capacitor: part(1.0 / (omega * r * elastance), r * dice.between(0.0, 0.01)),
        load: Load {
            r_ohm: r * dice.scattered(0.4, 2.5),
            x_ohm: 0.0,
        },
    }
}

#[test]
fn three_hundred_stages_keep_their_balance() {
    let mut dice = Dice(20_261_201);
    let (mut hard, mut diodes) = (0, 0);
    for number in 0..300 {
        let stage = stage(&mut dice);
        let reading = stage
            .solve()
            .unwrap_or_else(|e| panic!("stage {number}: {e}\n{stage:?}"));
        let f = reading.figures;
        assert!(f.supply_power_w > 0.0 && f.drain_efficiency > 0.0 && f.drain_efficiency <= 1.0);
        let floor = -stage.diode.map_or(0.0, |d| {
            d.forward_v + d.slope_ohm * f.switch_peak_a.max(f.supply_current_a) * 50.0
        });
        assert!(
            f.drain_least_v > floor,
            "stage {number}: the diode holds {} above {floor}",
            f.drain_least_v
        );
        hard += usize::from(f.turn_on_v > 0.2 * stage.supply_v);
        diodes += usize::from(f.diode_fraction > 0.0);
    }
    assert!(
        hard > 30 && diodes > 30,
        "the scatter covers both kinds: {hard} hard, {diodes} with diode"
    );
}

#[test]
fn frequency_impedance_and_voltage_only_scale() {
    let mut dice = Dice(7);
    for _ in 0..40 {
        let a = stage(&mut dice);
        let (f, z, v) = (1.7, 2.3, 3.1);
        let part = |p: Part, value: f64| Part {
            value,
            esr_ohm: p.esr_ohm * z,
        };
        let b = Stage {
            carrier_hz: a.carrier_hz * f,
            duty: a.duty,
            supply_v: a.supply_v * v,
            on_resistance_ohm: a.on_resistance_ohm * z,
            fall_s: a.fall_s / f,
            device_f: 0.0,
            device_law: None,
            trap: None,
            pair: None,
            uppers: Vec::new(),
            threshold_v: 0.0,
            diode: a.diode.map(|d| Diode {
                forward_v: d.forward_v * v,
                slope_ohm: d.slope_ohm * z,
            }),
            feed: part(a.feed, a.feed.value * z / f),
            shunt: part(a.shunt, a.shunt.value / (z * f)),
            series_coil: part(a.series_coil, a.series_coil.value * z / f),
            series_capacitor: part(a.series_capacitor, a.series_capacitor.value / (z * f)),
            load: Load {
                r_ohm: a.load.r_ohm * z,
                x_ohm: 0.0,
            },
        };
        let (x, y) = (
            a.solve().expect("solved").figures,
            b.solve().expect("solved").figures,
        );
        for (from, to, scale) in [
            (x.supply_power_w, y.supply_power_w, v * v / z),
            (x.output_power_w, y.output_power_w, v * v / z),
            (x.drain_peak_v, y.drain_peak_v, v),
            (x.switch_peak_a, y.switch_peak_a, v / z),
        ] {
            assert!(
                (to / (from * scale) - 1.0).abs() < 1e-9,
                "{from} times {scale} became {to}"
            );
        }
    }
}

/// An on-resistance a millionth of the load agrees with the ideal switch.
#[test]
fn a_very_small_on_resistance_is_almost_ideal() {
    let mut dice = Dice(11);
    for _ in 0..20 {
        let ideal = Stage {
            on_resistance_ohm: 0.0,
            ..stage(&mut dice)
        };
        let small = Stage {
            on_resistance_ohm: 1e-6 * ideal.load.r_ohm,
            ..ideal.clone()
        };
        let (x, y) = (ideal.solve().expect("ideal"), small.solve().expect("small"));
        let close = |a: f64, b: f64| (a / b - 1.0).abs() < 1e-4;
        assert!(close(x.figures.output_power_w, y.figures.output_power_w));
        assert!(close(x.figures.drain_peak_v, y.figures.drain_peak_v));
    }
}
