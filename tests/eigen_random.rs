//! Random Sturm-Liouville problems: the oscillation count equals the modes returned, every time.

use spanwise::model::{Model, Side};
use spanwise::problem::Problem;
use spanwise::solve::{Ask, Method, Settings, eigen};

/// A fixed sequence of numbers in [0, 1[ (splitmix64).
struct Sequence(u64);

impl Sequence {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut h = self.0;
        h = (h ^ (h >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        h = (h ^ (h >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        ((h ^ (h >> 31)) >> 11) as f64 / (1u64 << 53) as f64
    }

    fn between(&mut self, a: f64, b: f64) -> f64 {
        a + (b - a) * self.next()
    }
}

/// p u'' + p' u' - q u + lambda w u = 0 with smooth random p, w > 0, any q, and random end conditions; or the same
/// with data that step, carried as a flux.
fn problem(random: &mut Sequence) -> impl Model + use<> {
    let length = random.between(0.3, 4.0);
    let ends = [random.between(-1.5, 1.5), random.between(-1.5, 1.5)];
    let dirichlet = [random.next() < 0.4, random.next() < 0.4];
    let waves: [f64; 4] = std::array::from_fn(|_| random.between(0.5, 6.0));
    let (depth, weight) = (random.between(-60.0, 60.0), random.between(0.1, 0.8));
    let grow = random.between(-1.5, 1.5);
    let steps = random.next() < 0.4;
    let place = length * random.between(0.2, 0.8);
    let ratio = random.between(0.1, 5.0);
    let mut p = Problem::new(0.0, length);
    let (u, q) = (p.unknown("u", 1), p.unknown("q", 1));
    let lambda = p.constant("lambda");
    if steps {
        p.break_at(place);
    }
    let factor = move |piece: usize| if piece == 1 { ratio } else { 1.0 };
    p.equation("flux", move |at| at.d(u, 1) * ((grow * at.x()).exp() * factor(at.piece())) - at.d(q, 0));
    p.equation("balance", move |at| {
        let x = at.x();
        let potential = depth * (waves[0] * x + waves[1]).sin() * (waves[2] * x).cos();
        at.d(q, 1) - at.d(u, 0) * potential + at.constant(lambda) * at.d(u, 0) * (1.0 + weight * (waves[3] * x).sin())
    });
    for (end, (x, side)) in [(0.0, Side::Right), (length, Side::Left)].into_iter().enumerate() {
        let robin = ends[end];
        if dirichlet[end] {
            p.condition("end", &[(x, side)], move |v| v[0].d(u, 0));
        } else {
            p.condition("end", &[(x, side)], move |v| v[0].d(q, 0) - v[0].d(u, 0) * robin);
        }
    }
    p.build().expect("a sound problem")
}

fn run(from: u64, count: u64) {
    for seed in from..from + count {
        let mut random = Sequence(seed * 7919 + 2385);
        let model = problem(&mut random);
        let n = 1 + (random.next() * 12.0) as usize;
        let spectrum = eigen(&model, Ask::Lowest(n), &Settings::default())
            .unwrap_or_else(|error| panic!("problem {seed}: {error}"));
        assert_eq!(spectrum.modes.len(), n, "problem {seed}: {:?}", spectrum.discarded);
        assert_eq!(spectrum.count.method, Method::Oscillation, "problem {seed}");
        assert_eq!(spectrum.count.checked, Some(true), "problem {seed}: {:?}", spectrum.count);
        assert!(spectrum.modes.windows(2).all(|m| m[0].value.re < m[1].value.re), "problem {seed}");
        for mode in &spectrum.modes {
            assert!(mode.value.im == 0.0 && mode.error <= 1e-9 * mode.value.norm().max(1.0), "{:?}", mode.value);
        }
    }
}

#[test]
fn count_equals_modes() {
    run(0, 40);
}

/// The long form: `cargo test --release --test eigen_random -- --ignored`.
#[test]
#[ignore = "takes a minute or two"]
fn count_equals_modes_of_five_hundred() {
    run(40, 500);
}
