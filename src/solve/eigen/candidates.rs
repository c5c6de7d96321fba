//! Candidates from the dense pencil on two meshes.

use super::{Ask, Discarded, Reason, Task, too_few};
use crate::adapt::seed;
use crate::error::{Eigen, Error, Result};
use crate::field::Field;
use crate::linear::Library;
use crate::mesh::{Element, Mesh, Side};
use crate::model::Held;
use crate::spectrum::dense::{self, Candidates, Dense};
use num_complex::Complex64;

/// Most refinements of the candidates' mesh.
const LEVELS: usize = 6;
/// Nodes for each eigenvalue wanted: a half-wave needs pi/2, and meshes of many elements some more.
const NODES_PER_MODE: usize = 3;
/// Nodes of an element.
const NODES: usize = 20;
/// From so many nodes on elements have more of them.
const MANY: usize = 150;
/// Nodes of an element then.
const MOST_NODES: usize = 32;
/// How many nodes the second mesh has more on each element.
const MORE: usize = 4;
/// Largest drift between two meshes, relative.
const DRIFT: f64 = 1e-5;
/// Candidates closer than this, relative, belong together.
pub(super) const CLUSTER: f64 = 1e-5;
/// Most rows of a dense matrix: some ten seconds.
const MOST_ROWS: usize = 2600;

/// A candidate that both meshes agree on.
pub(super) struct Start {
    /// Its value.
    pub value: Complex64,
    /// How far the two meshes are apart.
    pub drift: f64,
    /// Its function: real and imaginary part.
    pub fields: [Field; 2],
}

/// What the search gave.
pub(super) struct Found {
    /// In the order asked; conjugates of a real problem once, with positive imaginary part.
    pub starts: Vec<Start>,
    /// Those that drift.
    pub discarded: Vec<Discarded>,
    /// Further values beyond the wanted ones, in order.
    pub beyond: Vec<Complex64>,
}

impl Task<'_> {
    /// Looks for the wanted eigenvalues, on finer and finer meshes until two agree on all of them.
    pub(super) fn candidates(&self, finer: usize) -> Result<Found> {
        let wanted = self.ask.wanted();
        let mut library = Library::new(self.pencil.layout.orders().iter().copied().max().unwrap_or(0));
        let mut least = finer * (NODES_PER_MODE * wanted.unwrap_or(6) + NODES);
        let mut about = self.pencil.size;
        let mut lowest: Option<f64> = None;
        let mut before: Vec<Complex64> = Vec::new();
        for level in 0..LEVELS {
            self.tick(level)?;
            let mesh = self.mesh(about, least)?;
            let nodes = dense::nodes(&mesh);
            let coarse = Dense::new(&self.pencil, mesh.clone(), &self.scale, &mut library)?;
            let fine = Dense::new(&self.pencil, mesh.enriched(MORE), &self.scale, &mut library)?;
            if fine.size() > MOST_ROWS {
                return Err(Error::Unresolved { elements: mesh.elements.len(), x: self.pencil.model.points()[0] });
            }
            let (first, second) = self.eigenvalues(&coarse, &fine)?;
            let sorted = self.sorted(&first, &second);
            let agreed = sorted.iter().filter(|s| s.agrees).count();
            let enough = match wanted {
                Some(n) => self.first_agree(&sorted, n),
                None => self.inside_agree(&sorted),
            };
            let same_rank = first.finite == second.finite && fine.size() != coarse.size();
            if let Some(n) = wanted
                && same_rank
                && agreed == first.finite
                && agreed < n
            {
                let asked = if matches!(self.ask, Ask::Pairs(_)) { n / 2 } else { n };
                return Err(too_few(asked, agreed));
            }
            if matches!(self.ask, Ask::Lowest(_)) {
                let now = sorted.iter().find(|s| s.agrees).map(|s| s.value.re);
                if let (Some(before), Some(now)) = (lowest, now)
                    && now < 0.0
                    && now < 1.5 * before.min(0.0) - 1e-6 * self.pencil.size
                {
                    return Err(Eigen::Unbounded { seen: now }.into());
                }
                // A negative one may be the first of many: one more look with a finer mesh, where it can be had.
                let first_look = lowest.is_none() && 2 * fine.size() < MOST_ROWS;
                lowest = now.or(lowest);
                if first_look && now.is_some_and(|v| v < 0.0) && level + 1 < LEVELS {
                    least = 2 * nodes;
                    continue;
                }
            }
            // Those that drift stay in the way for ever where they are false: what agrees must be the same twice.
            let now: Vec<Complex64> =
                sorted.iter().filter(|s| s.agrees).map(|s| s.value).take(wanted.unwrap_or(agreed)).collect();
            let steady = level >= 1
                && wanted.is_none_or(|n| self.total(&now) >= n)
                && now.len() == before.len()
                && now.iter().zip(&before).all(|(a, b)| (a - b).norm() <= 10.0 * DRIFT * a.norm().max(b.norm()));
            before = now;
            if enough || steady || level + 1 == LEVELS {
                return self.gather(sorted, second, &fine, &mut library);
            }
            let reach = wanted.unwrap_or(sorted.len()).min(sorted.len());
            // Those that drift may be anything, false ones as large as the mesh allows.
            let agreed = sorted.iter().filter(|s| s.agrees).take(reach);
            about = agreed.map(|s| s.value.norm()).fold(about, f64::max);
            least = nodes + nodes / 4 + NODES;
        }
        Err(Error::NoSolution { tried: "the candidates of an eigenproblem".into() })
    }

    pub(super) fn tick(&self, level: usize) -> Result<()> {
        let progress = crate::solve::Progress { pass: level + 1, elements: 0, done: 0 };
        if self.settings.watch.is_none_or(|w| w(progress)) { Ok(()) } else { Err(Error::Interrupted) }
    }

    /// A seeded mesh for eigenvalues of a certain size, with at least so many nodes.
    pub(super) fn mesh(&self, about: f64, least: usize) -> Result<Mesh> {
        let held = Held::new(self.pencil.model, vec![about], true);
        let seeded = seed::seed(&held, &self.doubled_scale(), self.open, 400)?;
        let length = self.pencil.length();
        // Many waves are carried best by few elements of many nodes.
        let nodes = if least > MANY { MOST_NODES } else { NODES };
        if seeded.elements.len() == 1 && least <= 2 * NODES {
            let elements = seeded.elements.into_iter().map(|e| Element { nodes: least.max(NODES), ..e }).collect();
            return Ok(Mesh { elements });
        }
        let mut elements = Vec::new();
        for element in seeded.elements {
            let share = element.length() / length * least as f64 / nodes as f64;
            let parts = (share - 1e-9).ceil().max(1.0) as usize;
            let edge = |k: usize| element.left + element.length() * k as f64 / parts as f64;
            elements.extend((0..parts).map(|k| Element {
                left: if k == 0 { element.left } else { edge(k) },
                right: if k + 1 == parts { element.right } else { edge(k + 1) },
                nodes,
                open: element.open.filter(|side| k == if *side == Side::Left { 0 } else { parts - 1 }),
                ..element
            }));
        }
        Ok(Mesh { elements })
    }

    /// Eigenvalues on both meshes about a shift at which the matrices are regular.
    fn eigenvalues(&self, coarse: &Dense<'_>, fine: &Dense<'_>) -> Result<(Candidates, Candidates)> {
        let s = self.pencil.size;
        let centre = match self.ask {
            Ask::Near(z, _) => z,
            Ask::Between(a, b) => Complex64::from(0.5 * (a + b)),
            _ => Complex64::ZERO,
        };
        let step = match self.ask {
            Ask::Between(a, b) => 0.05 * (b - a),
            Ask::Near(z, _) if z.norm() > 0.0 => 0.01 * z.norm(),
            _ => s,
        };
        // None of these is likely to be an eigenvalue, and not all of them are.
        for factor in [-0.1237, 0.2851, -1.713, 0.0631] {
            let shift = centre + factor * step;
            let second = fine.eigenvalues(shift, true)?;
            if second.regular {
                let first = coarse.eigenvalues(shift, false)?;
                if first.regular {
                    return Ok((first, second));
                }
            }
        }
        let why = "the matrix of the problem is singular for every parameter tried".to_owned();
        Err(Eigen::Everything { why }.into())
    }

    /// Values of the finer mesh in the order asked, each with its drift.
    fn sorted(&self, first: &Candidates, second: &Candidates) -> Vec<Ranked> {
        let real = !self.pencil.complex && self.ask.paired();
        let mut sorted: Vec<Ranked> = second
            .found
            .iter()
            .enumerate()
            .map(|(index, candidate)| {
                let value = candidate.value;
                let near = first
                    .found
                    .iter()
                    .map(|c| c.value)
                    .min_by(|a, b| (a - value).norm().total_cmp(&(b - value).norm()));
                let before = near.unwrap_or(Complex64::new(f64::INFINITY, 0.0));
                Ranked { index, value, before, agrees: false }
            })
            // The conjugate of a real problem's eigenvalue says nothing new.
            .filter(|r| !(real && r.value.im < 0.0))
            .filter(|r| r.value.re.is_finite() && r.value.im.is_finite())
            .collect();
        sorted.sort_by(|a, b| {
            self.ask.rank(a.value).total_cmp(&self.ask.rank(b.value)).then(b.value.im.total_cmp(&a.value.im))
        });
        let reach = self.ask.wanted().unwrap_or(6).min(sorted.len());
        let mut sizes: Vec<f64> = sorted[..reach].iter().map(|r| r.value.norm()).collect();
        sizes.sort_by(f64::total_cmp);
        let floor = 1e-3 * sizes.get(sizes.len() / 2).copied().unwrap_or(0.0);
        for r in &mut sorted {
            r.agrees = (r.value - r.before).norm() <= DRIFT * r.value.norm().max(floor);
        }
        sorted
    }

    /// How often an eigenvalue counts: a conjugate pair of a real problem twice, but for pairs asked.
    fn weight(&self, value: Complex64) -> usize {
        let pair = !self.pencil.complex && self.ask.paired() && value.im > 0.0;
        if pair { 2 } else { 1 }
    }

    fn total(&self, values: &[Complex64]) -> usize {
        values.iter().map(|v| self.weight(*v)).sum()
    }

    /// Whether the first n in the order asked all agree.
    fn first_agree(&self, sorted: &[Ranked], n: usize) -> bool {
        let mut count = 0;
        for r in sorted {
            if !r.agrees {
                return false;
            }
            count += self.weight(r.value);
            if count >= n {
                return true;
            }
        }
        false
    }

    /// Whether all in the interval agree, and one on either side or none at all.
    fn inside_agree(&self, sorted: &[Ranked]) -> bool {
        let Ask::Between(a, b) = self.ask else { return false };
        let margin = 0.05 * (b - a);
        let mut inside = sorted.iter().filter(|r| r.value.re >= a - margin && r.value.re <= b + margin);
        inside.all(|r| r.agrees)
    }

    fn gather(
        &self,
        sorted: Vec<Ranked>,
        second: Candidates,
        fine: &Dense<'_>,
        library: &mut Library,
    ) -> Result<Found> {
        let mut found = Found { starts: Vec::new(), discarded: Vec::new(), beyond: Vec::new() };
        let (mut count, wanted) = (0, self.ask.wanted());
        for r in &sorted {
            let inside = match self.ask {
                Ask::Between(a, b) => {
                    let margin = 1e-6 * (b - a);
                    r.value.re >= a - margin && r.value.re <= b + margin
                }
                Ask::Pairs(_) => r.value.im > 1e-8 * r.value.norm(),
                _ => true,
            };
            let full = wanted.is_some_and(|n| count >= n) && !found.starts.last().is_some_and(|last| r.close_to(last));
            if !inside || full {
                if full && r.agrees && found.beyond.len() < 4 {
                    found.beyond.push(r.value);
                }
                if full && found.beyond.len() >= 4 {
                    break;
                }
                continue;
            }
            if !r.agrees {
                found.discarded.push(Discarded { value: r.value, reason: Reason::Drift { before: r.before } });
                continue;
            }
            count += self.weight(r.value);
            let fields = fine.fields(&second.found[r.index], library)?;
            found.starts.push(Start { value: r.value, drift: (r.value - r.before).norm(), fields });
        }
        Ok(found)
    }
}

impl Ranked {
    /// Whether it belongs to the cluster of another: a cluster is never cut.
    fn close_to(&self, last: &Start) -> bool {
        let distance = (self.value - last.value).norm();
        let drift = last.drift + (self.value - self.before).norm();
        self.agrees && distance <= CLUSTER * self.value.norm() + 3.0 * drift
    }
}

/// A value of the finer mesh.
struct Ranked {
    index: usize,
    value: Complex64,
    /// The nearest value of the coarser mesh.
    before: Complex64,
    agrees: bool,
}
