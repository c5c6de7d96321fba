//! The engine through Rust closures, against closed forms.

use spanwise::model::Side;
use spanwise::problem::{Expression, Problem};
use spanwise::solve::Settings;

#[test]
fn layers() {
    for eps in [1e-2, 1e-4, 1e-6, 1e-8, 1e-10] {
        let mut p = Problem::new(0.0, 1.0);
        let y = p.unknown("y", 2);
        p.equation("e", move |at| at.d(y, 2) * eps - at.d(y, 0));
        p.condition("l", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - 1.0);
        p.condition("r", &[(1.0, Side::Left)], move |v| v[0].d(y, 0));
        let s = p.solve(&Settings::default()).unwrap();
        let r = f64::sqrt(eps);
        for x in [0.0, 0.5 * r, r, 4.0 * r, 0.3, 0.5, 1.0] {
            let v = s.value(y, 0, x, Side::Left).unwrap();
            let exact = ((-x / r).exp() - ((x - 2.0) / r).exp()) / (1.0 - (-2.0 / r).exp());
            println!("eps {eps} x {x} v {} err {:e} bar {:e}", v.value, v.value - exact, v.error);
        }
        println!("  passes {} elements {} resolved {}", s.passes, s.field.mesh.elements.len(), s.resolved);
        let mut p = Problem::new(0.0, 1.0);
        let y = p.unknown("y", 2);
        p.equation("e", move |at| at.d(y, 2) * eps - at.d(y, 1));
        p.condition("l", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - 1.0);
        p.condition("r", &[(1.0, Side::Left)], move |v| v[0].d(y, 0));
        let s = p.solve(&Settings::default()).unwrap();
        for x in [0.5, 1.0 - 4.0 * eps, 1.0 - eps, 1.0] {
            let v = s.value(y, 0, x, Side::Left).unwrap();
            let exact = -((x - 1.0) / eps).exp_m1() / -(-1.0 / eps).exp_m1();
            println!("y' eps {eps} x {x} v {} err {:e} bar {:e}", v.value, v.value - exact, v.error);
        }
        println!("  passes {} elements {} resolved {}", s.passes, s.field.mesh.elements.len(), s.resolved);
    }
}

#[test]
fn variable() {
    // P06: eps y'' + x y' = -eps pi^2 cos(pi x) - pi x sin(pi x)
    for eps in [1e-2f64, 1e-4, 1e-6, 1e-8] {
        let mut p = Problem::new(-1.0, 1.0);
        let y = p.unknown("y", 2);
        let pi = std::f64::consts::PI;
        p.equation("e", move |at| {
            let x = at.x();
            at.d(y, 2) * eps + at.d(y, 1) * x + eps * pi * pi * (pi * x).cos() + pi * x * (pi * x).sin()
        });
        p.condition("l", &[(-1.0, Side::Right)], move |v| v[0].d(y, 0) + 2.0);
        p.condition("r", &[(1.0, Side::Left)], move |v| v[0].d(y, 0));
        let s = p.solve(&Settings::default()).unwrap();
        for x in [-0.5, 0.0, 0.3 * eps.sqrt(), 0.5] {
            let v = s.value(y, 0, x, Side::Left).unwrap();
            let exact = (pi * x).cos() + libm::erf(x / (2.0 * eps).sqrt()) / libm::erf(1.0 / (2.0 * eps).sqrt());
            println!("P06 eps {eps} x {x} v {} err {:e} bar {:e}", v.value, v.value - exact, v.error);
        }
        println!("  passes {} elements {} resolved {}", s.passes, s.field.mesh.elements.len(), s.resolved);
        // P09
        let mut p = Problem::new(-1.0, 1.0);
        let y = p.unknown("y", 2);
        p.equation("e", move |at| {
            let x = at.x();
            at.d(y, 2) * (eps + x * x) + at.d(y, 1) * 4.0 * x + at.d(y, 0) * 2.0
        });
        p.condition("l", &[(-1.0, Side::Right)], move |v| v[0].d(y, 0) - 1.0 / (1.0 + eps));
        p.condition("r", &[(1.0, Side::Left)], move |v| v[0].d(y, 0) - 1.0 / (1.0 + eps));
        let s = p.solve(&Settings::default()).unwrap();
        for x in [-0.5, 0.0, 0.3 * eps.sqrt(), 0.5] {
            let v = s.value(y, 0, x, Side::Left).unwrap();
            let exact = 1.0 / (eps + x * x);
            println!("P09 eps {eps} x {x} v {} rel {:e} bar {:e}", v.value, v.value / exact - 1.0, v.error / exact);
        }
        println!("  passes {} elements {} resolved {}", s.passes, s.field.mesh.elements.len(), s.resolved);
        // P17
        let mut p = Problem::new(-0.1, 0.1);
        let y = p.unknown("y", 2);
        p.equation("e", move |at| {
            let x = at.x();
            at.d(y, 2) + at.d(y, 0) * (3.0 * 0.3) * eps / (0.3 * eps + x * x).powi(2)
        });
        let eps = 0.3 * eps;
        let e = 0.1 / (eps + 0.01).sqrt();
        p.condition("l", &[(-0.1, Side::Right)], move |v| v[0].d(y, 0) + e);
        p.condition("r", &[(0.1, Side::Left)], move |v| v[0].d(y, 0) - e);
        let s = p.solve(&Settings::default()).unwrap();
        for x in [-0.05, 0.0, 0.3 * eps.sqrt(), 0.01] {
            let v = s.value(y, 0, x, Side::Left).unwrap();
            let exact = x / (eps + x * x).sqrt();
            println!("P17 eps {eps} x {x} v {} err {:e} bar {:e}", v.value, v.value - exact, v.error);
        }
        println!("  passes {} elements {} resolved {}", s.passes, s.field.mesh.elements.len(), s.resolved);
    }
    for eps in [1.0 / 11.0, 0.01, 0.001] {
        let mut p = Problem::new(0.0, 1.0);
        let y = p.unknown("y", 2);
        let pi = std::f64::consts::PI;
        p.equation("e", move |at| at.d(y, 2) * eps * eps + at.d(y, 0) * (pi * pi / 4.0));
        p.condition("l", &[(0.0, Side::Right)], move |v| v[0].d(y, 0));
        p.condition("r", &[(1.0, Side::Left)], move |v| v[0].d(y, 0) - (pi / 2.0 / eps).sin());
        match p.solve(&Settings::default()) {
            Ok(s) => {
                for x in [0.3, 0.77] {
                    let v = s.value(y, 0, x, Side::Left).unwrap();
                    let exact = (pi * x / 2.0 / eps).sin();
                    println!("P16 eps {eps} x {x} v {} err {:e} bar {:e}", v.value, v.value - exact, v.error);
                }
                println!("  passes {} elements {} resolved {}", s.passes, s.field.mesh.elements.len(), s.resolved);
            }
            Err(e) => println!("P16 {eps}: {e}"),
        }
    }
    let _ = Expression::new(&[2], |at| at.d(0, 0));
}
