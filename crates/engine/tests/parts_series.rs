//! Preferred values against IEC 60063:2015, and pairs of them against every pair there is.

use evenfall_engine::parts::series::{Combination, Kind, Parts, Series, combine};

/// IEC 60063.
#[test]
fn preferred_values() {
    let decade = |series: Series| -> Vec<f64> { series.values([100.0, 999.0]).unwrap() };
    assert_eq!(
        decade(Series::E6),
        [100.0, 150.0, 220.0, 330.0, 470.0, 680.0]
    );
    let e12 = [
        100.0, 120.0, 150.0, 180.0, 220.0, 270.0, 330.0, 390.0, 470.0, 560.0, 680.0, 820.0,
    ];
    assert_eq!(decade(Series::E12), e12);
    let mut e24 = e12.to_vec();
    e24.extend([
        110.0, 130.0, 160.0, 200.0, 240.0, 300.0, 360.0, 430.0, 510.0, 620.0, 750.0, 910.0,
    ]);
    e24.sort_by(f64::total_cmp);
    assert_eq!(decade(Series::E24), e24);
    let e96 = [
        100.0, 102.0, 105.0, 107.0, 110.0, 113.0, 115.0, 118.0, 121.0, 124.0, 127.0, 130.0, 133.0,
        137.0, 140.0, 143.0, 147.0, 150.0, 154.0, 158.0, 162.0, 165.0, 169.0, 174.0, 178.0, 182.0,
        187.0, 191.0, 196.0, 200.0, 205.0, 210.0, 215.0, 221.0, 226.0, 232.0, 237.0, 243.0, 249.0,
        255.0, 261.0, 267.0, 274.0, 280.0, 287.0, 294.0, 301.0, 309.0, 316.0, 324.0, 332.0, 340.0,
        348.0, 357.0, 365.0, 374.0, 383.0, 392.0, 402.0, 412.0, 422.0, 432.0, 442.0, 453.0, 464.0,
        475.0, 487.0, 499.0, 511.0, 523.0, 536.0, 549.0, 562.0, 576.0, 590.0, 604.0, 619.0, 634.0,
        649.0, 665.0, 681.0, 698.0, 715.0, 732.0, 750.0, 768.0, 787.0, 806.0, 825.0, 845.0, 866.0,
        887.0, 909.0, 931.0, 953.0, 976.0,
    ];
    assert_eq!(decade(Series::E96), e96);
    let e48: Vec<f64> = e96.into_iter().step_by(2).collect();
    assert_eq!(decade(Series::E48), e48);
}

#[test]
fn nearest_values() {
    assert_eq!(Series::E24.nearest(4.7e-9).unwrap(), 4.7e-9);
    assert_eq!(Series::E12.nearest(638.975e-12).unwrap(), 680e-12);
    assert_eq!(
        Series::E12.neighbours(638.975e-12).unwrap(),
        [560e-12, 680e-12]
    );
    assert_eq!(Series::E6.neighbours(0.99e-6).unwrap(), [0.68e-6, 1e-6]);
    assert_eq!(Series::E96.neighbours(1e-6).unwrap(), [1e-6, 1e-6]);
    // A rounding below a preferred value is that value.
    assert_eq!(
        Series::E24.neighbours(4.7 * 1e-9 * (1.0 - 2e-16)).unwrap(),
        [4.7e-9, 4.7e-9]
    );
}

/// Every pair of the stock, both ways.
fn exhaustive(series: Series, wanted: f64, stock: [f64; 2]) -> f64 {
    let values = series.values(stock).unwrap();
    let mut best = f64::INFINITY;
    for a in &values {
        best = best.min((a - wanted).abs());
        for b in &values {
            best = best.min((a + b - wanted).abs());
            best = best.min((1.0 / (1.0 / a + 1.0 / b) - wanted).abs());
        }
    }
    best / wanted
}

#[test]
fn pairs_are_as_near_as_any() {
    for series in [
        Series::E6,
        Series::E12,
        Series::E24,
        Series::E48,
        Series::E96,
    ] {
        for stock in [[1e-12, 1e-8], [1e-11, 1e-9], [1e-10, 1e-10]] {
            for step in 0..60 {
                let wanted = 2e-13 * libm::pow(10.0, 0.0917 * f64::from(step));
                for kind in [Kind::Capacitance, Kind::Inductance] {
                    let found = combine(series, wanted, kind, stock).unwrap();
                    let best = found
                        .iter()
                        .fold(f64::INFINITY, |b, c| b.min(c.error.abs()));
                    let want = exhaustive(series, wanted, stock);
                    assert!(best <= want + 1e-12, "{series:?} {wanted}: {best}, {want}");
                    for choice in &found {
                        let value = made(kind, choice.parts);
                        assert!((choice.value / value - 1.0).abs() < 1e-12);
                    }
                    assert!(matches!(found[0].parts, Parts::Single(_)));
                    assert!(
                        found
                            .iter()
                            .skip(1)
                            .all(|c| c.error.abs() < found[0].error.abs())
                    );
                    let pairs = &found[1..];
                    assert!(pairs.is_sorted_by_key(|c: &Combination| c.error.abs()));
                }
            }
        }
    }
}

fn made(kind: Kind, parts: Parts) -> f64 {
    match (kind, parts) {
        (_, Parts::Single(a)) => a,
        (Kind::Capacitance, Parts::Parallel(a, b)) | (Kind::Inductance, Parts::Series(a, b)) => {
            a + b
        }
        (_, Parts::Parallel(a, b) | Parts::Series(a, b)) => a * b / (a + b),
    }
}
