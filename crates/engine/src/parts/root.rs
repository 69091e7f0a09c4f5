//! The root of a function of one variable between two places of opposite sign.

/// Where `f` is zero between `low` and `high`, by false position with the weight of a stuck end
/// halved (the Illinois method: Dowell and Jarratt, BIT 11, 1971; from memory) and every third
/// step a bisection. `f` is dimensionless; the root is good to 1e-11 of it. None where the signs
/// at the ends are the same or the root is not met within the cap.
pub(super) fn between(f: &dyn Fn(f64) -> f64, low: f64, high: f64) -> Option<f64> {
    const GOOD: f64 = 1e-11;
    const STEPS: usize = 200;
    let (mut a, mut b) = (low, high);
    let (mut fa, mut fb) = (f(a), f(b));
    if fa.abs() <= GOOD {
        return Some(a);
    }
    if fb.abs() <= GOOD {
        return Some(b);
    }
    if fa * fb >= 0.0 || (fa * fb).is_nan() {
        return None;
    }
    for step in 1..=STEPS {
        let x = if step % 3 == 0 {
            0.5 * (a + b)
        } else {
            (a * fb - b * fa) / (fb - fa)
        };
        let fx = f(x);
        if fx.abs() <= GOOD {
            return Some(x);
        }
        if fx * fb < 0.0 {
            (a, fa) = (b, fb);
        } else {
            fa *= 0.5;
        }
        (b, fb) = (x, fx);
    }
    None
}

#[cfg(test)]
mod tests {
    use super::between;

    #[test]
    fn finds_roots_of_either_slope() {
        for (f, low, high, want) in [
            (
                &(|x: f64| 1.0 - x * x) as &dyn Fn(f64) -> f64,
                0.0,
                7.0,
                1.0,
            ),
            (&|x| x * x * x - 8.0, -50.0, 60.0, 2.0),
            (&|x| libm::exp(-x) - 1e-3, 0.0, 100.0, 6.907755278982137),
        ] {
            let x = between(f, low, high).unwrap();
            assert!((x - want).abs() < 1e-7, "{x} against {want}");
        }
    }

    #[test]
    fn refuses_without_a_change_of_sign() {
        assert_eq!(between(&|x| x * x + 1.0, -1.0, 1.0), None);
        assert_eq!(between(&|_| f64::NAN, -1.0, 1.0), None);
        assert_eq!(
            between(&|x| if x < 0.5 { -1.0 } else { 1.0 }, 0.0, 1.0),
            None
        );
    }
}
