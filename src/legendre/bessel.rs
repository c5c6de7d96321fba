//! Zeros of the Bessel functions J_0 and J_1, to more digits than one `f64` holds.

use super::double::{Double, PI};

/// The k-th positive zero j of J_alpha, with 2 / (pi j J_alpha'(j)^2) - 1, which is small.
pub(crate) struct BesselZero {
    pub(crate) place: Double,
    pub(crate) excess: f64,
}

/// The k-th zero, k = 1, 2, ..., of J_1 or J_0, to about 1e-19 relative.
///
/// The first dozen from a table, the rest by McMahon's expansion (NIST DLMF 10.21.19 to seven terms); the
/// excess by the modulus function (DLMF 10.18.17). `tests/data/bessel.py` makes the constants.
pub(crate) fn zero(one: bool, k: usize) -> BesselZero {
    let table = if one { &OF_J1 } else { &OF_J0 };
    if let Some(&(hi, lo, excess)) = table.get(k - 1) {
        return BesselZero { place: Double { hi, lo }, excess };
    }
    expanded(one, k)
}

fn expanded(one: bool, k: usize) -> BesselZero {
    let (quarter, mcmahon, mu) = if one { (0.25, &MCMAHON_J1, 4.0) } else { (-0.25, &MCMAHON_J0, 0.0) };
    let b = PI * (k as f64 + quarter);
    let inverse = 1.0 / b.hi;
    let square = inverse * inverse;
    let correction = mcmahon.iter().rev().fold(0.0, |sum, c| sum * square + c) * inverse;
    let place = b + Double::from(correction);
    let half_square = 0.25 / (place.hi * place.hi);
    let (mut term, mut excess) = (1.0, 0.0);
    for i in 1..=9 {
        let odd = f64::from(2 * i - 1);
        term *= odd / (odd + 1.0) * (mu - odd * odd) * half_square;
        excess += term;
    }
    BesselZero { place, excess }
}

/// McMahon's coefficients of 1/b, 1/b^3, ..., b = (k - 1/4) pi.
const MCMAHON_J0: [f64; 7] = [
    1.0 / 8.0,
    -31.0 / 384.0,
    3_779.0 / 15_360.0,
    -6_277_237.0 / 3_440_640.0,
    2_092_163_573.0 / 82_575_360.0,
    -8_249_725_736_393.0 / 14_533_263_360.0,
    18690.476528232066,
];

/// The same with b = (k + 1/4) pi.
const MCMAHON_J1: [f64; 7] = [
    -3.0 / 8.0,
    3.0 / 128.0,
    -1_179.0 / 5_120.0,
    1_951_209.0 / 1_146_880.0,
    -223_791_831.0 / 9_175_040.0,
    895_281_248_007.0 / 1_614_807_040.0,
    -18397.387943535832,
];

/// Zeros as sums of two numbers, with their excess.
const OF_J0: [(f64, f64, f64); 12] = [
    (2.404825557695773, -1.176691651530894e-16, -0.01776588327814875),
    (5.520078110286311, 8.088597146146722e-17, -0.0039048287561221423),
    (8.653727912911013, -2.92812607320779e-16, -0.001633877917644238),
    (11.791534439014281, 2.812956912778735e-16, -0.0008884895192972263),
    (14.930917708487787, -7.070514505983074e-16, -0.0005565587546774232),
    (18.071063967910924, -9.658048089426209e-16, -0.0003808267178820361),
    (21.21163662987926, 4.947077428784068e-16, -0.0002767886264501215),
    (24.352471530749302, 9.169067133951066e-16, -0.0002101827516884854),
    (27.493479132040253, 1.6191941793302084e-15, -0.00016500100289774003),
    (30.634606468431976, -5.390359852115135e-16, -0.0001329560417119063),
    (33.77582021357357, 1.454224241250595e-15, -0.00010941030358974721),
    (36.917098353664045, -9.276489358569364e-16, -9.16049334304147e-05),
];

/// The same for J_1.
const OF_J1: [(f64, f64, f64); 12] = [
    (3.8317059702075125, -1.5269184090088067e-16, 0.024227862988153107),
    (7.015586669815619, -9.414165653410389e-17, 0.007484900740162579),
    (10.173468135062722, 4.482162274768888e-16, 0.003591661601917797),
    (13.323691936314223, 2.600408064718813e-16, 0.0021015340131201946),
    (16.470630050877634, -1.619019544798128e-15, 0.0013776245018084262),
    (19.615858510468243, -1.004445634526616e-15, 0.0009722298840427542),
    (22.760084380592772, -4.925749373614922e-16, 0.000722609013145551),
    (25.903672087618382, 4.894530726419825e-16, 0.0005580913595494057),
    (29.046828534916855, -2.799892014010185e-16, 0.00044396983770163967),
    (32.189679910974405, -1.5481609125503839e-15, 0.0003615817332307471),
    (35.33230755008387, -3.2611649318496424e-15, 0.000300166437122314),
    (38.474766234771614, 7.193676286738655e-16, 0.0002531657576458785),
];

#[cfg(test)]
mod tests {
    use super::*;

    /// Table and expansion are two roads to the same numbers.
    #[test]
    fn expansion_meets_the_table() {
        for one in [false, true] {
            let (table, expanded) = (zero(one, 12), expanded(one, 12));
            let gap = table.place - expanded.place;
            assert!(gap.hi.abs() < 1e-17, "J_{}: {gap:?}", u8::from(one));
            assert!((table.excess - expanded.excess).abs() < 1e-18);
        }
    }

    /// J_0 and J_1 beyond the table, digits by mpmath 1.3.
    #[test]
    fn hundredth_zeros() {
        // besseljzero(0, 100), besseljzero(1, 100)
        assert_eq!(zero(false, 100).place.hi, 313.37426607752786);
        assert_eq!(zero(true, 100).place.hi, 314.94347283776716);
    }
}
