//! What follows from a two-port's scattering parameters.

use num_complex::Complex64;

/// A two-port at one frequency.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TwoPort {
    /// Scattering parameters: `s[i][j]` is the wave out of port i for one into port j.
    pub s: [[Complex64; 2]; 2],
    /// Real reference resistance of each port, ohms.
    pub reference_ohm: [f64; 2],
}

impl TwoPort {
    fn determinant(&self) -> Complex64 {
        self.s[0][0] * self.s[1][1] - self.s[0][1] * self.s[1][0]
    }

    /// Chain parameters A, B (ohms), C (siemens), D; none where nothing passes from port 1 to
    /// port 2 (D.A. Frickey, IEEE Trans. MTT 42(2), 1994; from memory).
    pub fn chain(&self) -> Option<[[Complex64; 2]; 2]> {
        let [[s11, s12], [s21, s22]] = self.s;
        let [r1, r2] = self.reference_ohm;
        let both = (r1 * r2).sqrt();
        let across = s12 * s21;
        let one = Complex64::ONE;
        let scale = 0.5 / (s21 * both);
        let chain = [
            [
                ((one + s11) * (one - s22) + across) * r1 * scale,
                ((one + s11) * (one + s22) - across) * (r1 * r2) * scale,
            ],
            [
                ((one - s11) * (one - s22) - across) * scale,
                ((one - s11) * (one + s22) + across) * r2 * scale,
            ],
        ];
        let finite = |c: &Complex64| c.re.is_finite() && c.im.is_finite();
        chain.iter().flatten().all(finite).then_some(chain)
    }

    /// Power delivered to port 2's reference against that available from port 1's.
    pub fn transducer_gain(&self) -> f64 {
        self.s[1][0].norm_sqr()
    }

    /// Part of the power into port 1 that reaches port 2's reference resistance; none where no
    /// power enters.
    pub fn efficiency(&self) -> Option<f64> {
        let into = 1.0 - self.s[0][0].norm_sqr();
        (into > 0.0).then(|| self.transducer_gain() / into)
    }

    /// Greatest efficiency from port 1 to port 2 over every source and load:
    /// |S21/S12| (K - sqrt(K^2 - 1)) with the stability factor K (J.M. Rollett, IRE Trans.
    /// Circuit Theory 9(1), 1962; from memory), written without the quotient so that it holds
    /// for S12 = 0. None for a two-port that is not passive enough to have one (K < 1).
    pub fn greatest_efficiency(&self) -> Option<f64> {
        let [[s11, s12], [s21, s22]] = self.s;
        // 2 |S12 S21| K and 2 |S12 S21|.
        let k = 1.0 - s11.norm_sqr() - s22.norm_sqr() + self.determinant().norm_sqr();
        let one = 2.0 * (s12 * s21).norm_sqr().sqrt();
        let under = k * k - one * one;
        // Rounding of a lossless network leaves K just below 1.
        if !(k > 0.0 && under >= -1e-9 * k * k) {
            return (s21 == Complex64::ZERO && k >= 0.0).then_some(0.0);
        }
        Some(2.0 * s21.norm_sqr() / (k + under.max(0.0).sqrt()))
    }
}
