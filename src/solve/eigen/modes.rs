//! From candidates to modes: clusters, polishing, one solution for each mode.

use super::candidates::{CLUSTER, Found, Start};
use super::polish::Basis;
use super::{Ask, Count, Discarded, Method, Mode, Reason, Spectrum, Task};
use crate::error::{Error, Result};
use crate::evidence::bars::Companions;
use crate::field::Field;
use crate::mesh::{Element, Mesh};
use crate::model::Layout;
use crate::quantity::Estimate;
use crate::solve::Solution;
use crate::spectrum::block::Block;
use crate::spectrum::dense::small_eigenvalues as eigenvalues;
use nalgebra::DMatrix;
use num_complex::Complex64;
use std::collections::HashMap;

/// From so many groups on it pays to use all cores.
const MANY_GROUPS: usize = 12;
/// Most columns of one block.
const WIDEST: usize = 6;

impl Task<'_> {
    /// Polishes all candidates.
    pub(super) fn modes(&self, found: Found) -> Result<Spectrum> {
        let Found { starts, mut discarded, .. } = found;
        let clusters = self.clusters(&starts);
        let mut ahead = self.polished_ahead(&starts, &clusters);
        let mut groups: Vec<(Vec<usize>, Option<Vec<Mode>>)> = clusters.into_iter().map(|c| (c, None)).collect();
        // Groups that lead to the same place are joined and done again: each round leaves one less to do or one group less.
        while let Some(at) = groups.iter().position(|g| g.1.is_none()) {
            let members: Vec<&Start> = groups[at].0.iter().map(|k| &starts[*k]).collect();
            let mut discard = |reason: Reason| {
                discarded.extend(members.iter().map(|m| Discarded { value: m.value, reason }));
            };
            let outcome = ahead.remove(&groups[at].0).unwrap_or_else(|| self.polished(&members));
            match outcome {
                Ok(found) => match self.stray(&starts, &groups, at, &found) {
                    None => groups[at].1 = Some(found),
                    Some((other, _)) if groups[at].0.len() + groups[other].0.len() <= WIDEST => {
                        let (joined, _) = groups.remove(at.max(other));
                        let (kept, done) = &mut groups[at.min(other)];
                        kept.extend(joined);
                        *done = None;
                    }
                    Some((_, to)) => {
                        discard(Reason::Moved { to });
                        groups[at].1 = Some(Vec::new());
                    }
                },
                Err(Error::Interrupted) => return Err(Error::Interrupted),
                Err(error) => {
                    let unresolved = matches!(error, Error::Unresolved { .. });
                    discard(if unresolved { Reason::Unresolved } else { Reason::NoSolution });
                    groups[at].1 = Some(Vec::new());
                }
            }
        }
        let mut modes: Vec<Mode> = groups.into_iter().filter_map(|g| g.1).flatten().collect();
        self.arrange(&mut modes);
        let count =
            Count { checked: None, found: modes.len(), counted: None, method: Method::None, region: [f64::NAN; 4] };
        Ok(Spectrum { modes, discarded, count })
    }

    /// Polishes many groups on all cores; few are done when their turn comes. The result does not depend on it.
    fn polished_ahead(&self, starts: &[Start], clusters: &[Vec<usize>]) -> HashMap<Vec<usize>, Result<Vec<Mode>>> {
        let workers = std::thread::available_parallelism().map_or(1, |n| n.get().min(8));
        if workers < 2 || clusters.len() < MANY_GROUPS {
            return HashMap::new();
        }
        let work = |first: usize| -> Vec<(Vec<usize>, Result<Vec<Mode>>)> {
            let own = clusters.iter().skip(first).step_by(workers);
            own.map(|c| (c.clone(), self.polished(&c.iter().map(|k| &starts[*k]).collect::<Vec<_>>()))).collect()
        };
        std::thread::scope(|scope| {
            let threads: Vec<_> = (0..workers).map(|first| scope.spawn(move || work(first))).collect();
            // A thread that panicked leaves its groups to be done in turn.
            threads.into_iter().filter_map(|t| t.join().ok()).flatten().collect()
        })
    }

    /// Groups of candidates that lie close together.
    fn clusters(&self, starts: &[Start]) -> Vec<Vec<usize>> {
        let mut sizes: Vec<f64> = starts.iter().map(|s| s.value.norm()).collect();
        sizes.sort_by(f64::total_cmp);
        let floor = 1e-3 * sizes.get(sizes.len() / 2).copied().unwrap_or(0.0);
        let mut clusters: Vec<Vec<usize>> = Vec::new();
        for (k, start) in starts.iter().enumerate() {
            let near = |j: &usize| {
                let other = &starts[*j];
                let size = start.value.norm().max(other.value.norm()).max(floor);
                (start.value - other.value).norm() <= CLUSTER * size + 3.0 * (start.drift + other.drift)
            };
            match clusters.iter_mut().find(|c| c.iter().any(near) && c.len() < WIDEST) {
                Some(cluster) => cluster.push(k),
                None => clusters.push(vec![k]),
            }
        }
        clusters
    }

    /// Whether a candidate counts as complex.
    fn is_complex(&self, start: &Start) -> bool {
        self.pencil.complex || start.value.im.abs() > CLUSTER * start.value.norm() + 3.0 * start.drift
    }

    /// The group whose candidate one of the modes found is nearer to than to any of its own, and where that mode went.
    fn stray(
        &self,
        starts: &[Start],
        groups: &[(Vec<usize>, Option<Vec<Mode>>)],
        at: usize,
        found: &[Mode],
    ) -> Option<(usize, Complex64)> {
        let distance = |k: usize, value: Complex64| {
            let direct = (starts[k].value - value).norm();
            if self.pencil.complex { direct } else { direct.min((starts[k].value.conj() - value).norm()) }
        };
        for mode in found {
            let near = |g: &(Vec<usize>, Option<Vec<Mode>>)| {
                g.0.iter().map(|k| distance(*k, mode.value)).fold(f64::INFINITY, f64::min)
            };
            let own = near(&groups[at]);
            let drift = groups[at].0.iter().map(|k| starts[*k].drift).fold(0.0, f64::max);
            let others = groups.iter().enumerate().filter(|(g, _)| *g != at).map(|(g, group)| (g, near(group)));
            let nearest = others.min_by(|a, b| a.1.total_cmp(&b.1));
            if let Some((other, distance)) = nearest
                && distance < own
                && own > 3.0 * drift + mode.error
            {
                return Some((other, mode.value));
            }
        }
        None
    }

    fn polished(&self, members: &[&Start]) -> Result<Vec<Mode>> {
        let complex = members.iter().any(|m| self.is_complex(m));
        let basis = match members {
            [one] if complex || one.value.im == 0.0 => Basis::single(one, complex),
            _ => basis(members, complex),
        };
        let (block, solution) = self.polish(&basis)?;
        let mut modes = self.split(&block, &solution)?;
        if !self.pencil.complex && block.complex() {
            // The conjugate of each, but where pairs are asked for once.
            if !matches!(self.ask, Ask::Pairs(_)) && self.ask.paired() {
                let conjugates: Vec<Mode> = modes.iter().map(conjugate).collect();
                modes.extend(conjugates);
            }
        }
        Ok(modes)
    }

    /// The modes of a block: eigenvalues of S, and the combinations of columns that belong to them.
    fn split(&self, block: &Block<'_>, solution: &Solution) -> Result<Vec<Mode>> {
        let k = block.width();
        let order = eigenvalues(&block.matrix(&solution.field.constants), k);
        let mut modes = Vec::with_capacity(k);
        let all = || {
            let c = &solution.companions;
            c.coarser.iter().chain(&c.nudged)
        };
        // How far the eigenvalues of S move between companions: combinations of closer ones mean nothing.
        let moved = all().map(|f| {
            let other = eigenvalues(&block.matrix(&f.constants), k);
            order.iter().map(|v| other.iter().map(|w| (v - w).norm()).fold(f64::INFINITY, f64::min)).fold(0.0, f64::max)
        });
        let moved = moved.fold(0.0, f64::max);
        for (column, value) in order.iter().enumerate() {
            let apart =
                (0..k).filter(|c| *c != column).map(|c| (order[c] - value).norm()).fold(f64::INFINITY, f64::min);
            let single = k == 1 || apart > 1e2 * moved;
            let complex = block.complex() || (single && value.im != 0.0);
            if !block.complex() && single && value.im < 0.0 {
                continue;
            }
            let extract = |field: &Field| -> Field {
                let matrix = block.matrix(&field.constants);
                let own = eigenvalues(&matrix, k);
                // Companions number their eigenvalues as the answer does: by nearness where they are apart, by order else.
                let nearest = own.iter().copied().min_by(|a, b| (a - value).norm().total_cmp(&(b - value).norm()));
                let own_value = if single { nearest.unwrap_or(*value) } else { own[column] };
                let weights = if single {
                    eigenvector(&matrix, k, own_value)
                } else {
                    (0..k).map(|c| if c == column { Complex64::ONE } else { Complex64::ZERO }).collect()
                };
                let shown = if complex { own_value } else { Complex64::from(own_value.re) };
                self.combined(block, field, &weights, shown, complex)
            };
            let companions = Companions {
                coarser: solution.companions.coarser.iter().map(extract).collect(),
                nudged: solution.companions.nudged.iter().map(extract).collect(),
            };
            let own = Solution {
                field: extract(&solution.field),
                condition: solution.condition,
                passes: solution.passes,
                resolved: solution.resolved,
                companions,
            };
            let last = own.field.constants.len() - 1;
            let part = |at: usize| own.estimate(|f| Ok(Estimate { value: f.constants[at], error: 0.0 }));
            let (value, error) = if complex {
                let (re, im) = (part(last - 1)?, part(last)?);
                (Complex64::new(re.value, im.value), re.error.hypot(im.error))
            } else {
                let re = part(last)?;
                // An imaginary part that rounding may have made counts as error.
                (Complex64::from(re.value), re.error + value.im.abs())
            };
            modes.push(Mode { index: 0, multiplicity: 1, value, error, complex, solution: own });
        }
        Ok(modes)
    }

    /// A combination of the columns of a block as a field of its own, in the layout of the model or doubled.
    fn combined(
        &self,
        block: &Block<'_>,
        field: &Field,
        weights: &[Complex64],
        value: Complex64,
        complex: bool,
    ) -> Field {
        let own = &self.pencil.layout;
        let (d, parts) = (own.unknowns(), if block.complex() { 2 } else { 1 });
        let copies = if complex { 2 } else { 1 };
        let orders: Vec<usize> = own.orders().iter().flat_map(|m| std::iter::repeat_n(*m, copies)).collect();
        let layout = Layout::new(&orders, copies * (own.constants() + 1));
        // Real or imaginary part of sum_l weight_l * (re_l + i im_l).
        let mix = |part: usize, of: &dyn Fn(usize) -> Vec<f64>| -> Vec<f64> {
            let mut sum: Vec<f64> = Vec::new();
            for (l, weight) in weights.iter().enumerate() {
                for p in 0..parts {
                    let factor = if p == 0 { *weight } else { *weight * Complex64::I };
                    let factor = if part == 0 { factor.re } else { factor.im };
                    let values = of(parts * l + p);
                    sum.resize(values.len(), 0.0);
                    sum.iter_mut().zip(&values).for_each(|(s, v)| *s += factor * v);
                }
            }
            sum
        };
        let mut series = Vec::with_capacity(field.mesh.elements.len());
        for e in 0..field.mesh.elements.len() {
            let mut jets = Vec::with_capacity(layout.jets());
            for (i, &m) in own.orders().iter().enumerate() {
                for part in 0..copies {
                    jets.extend((0..=m).map(|k| mix(part, &|c| field.series(e, c * d + i, k).to_vec())));
                }
            }
            series.push(jets);
        }
        let mut constants = Vec::with_capacity(layout.constants());
        for p in 0..own.constants() {
            for part in 0..copies {
                constants.extend(mix(part, &|c| vec![field.constants[c * own.constants() + p]]));
            }
        }
        constants.push(value.re);
        if complex {
            constants.push(value.im);
        }
        let elements = field.mesh.elements.iter().map(|e| Element { piece: block.piece(e.piece), ..*e }).collect();
        Field::from_series(Mesh { elements }, &layout, constants, series)
    }

    /// Puts modes in the order asked, cuts the list, and sets indices, multiplicities and zeros.
    fn arrange(&self, modes: &mut Vec<Mode>) {
        if let Ask::Between(a, b) = self.ask {
            modes.retain(|m| m.value.re >= a - m.error && m.value.re <= b + m.error);
        }
        let rank = |m: &Mode| self.ask.rank(m.value);
        modes.sort_by(|a, b| {
            // Numbers that cannot be told apart rank alike.
            let (ra, rb) = (rank(a), rank(b));
            let alike = (ra - rb).abs() <= a.error + b.error;
            let by_rank = if alike { std::cmp::Ordering::Equal } else { ra.total_cmp(&rb) };
            by_rank.then(b.value.im.total_cmp(&a.value.im)).then(ra.total_cmp(&rb))
        });
        let smallest = |modes: &[Mode]| {
            modes
                .iter()
                .filter(|m| m.value.norm() > 10.0 * m.error)
                .map(|m| m.value.norm())
                .fold(f64::INFINITY, f64::min)
        };
        let yardstick = smallest(modes);
        for mode in modes.iter_mut() {
            let size = mode.value.norm();
            if size > 0.0 && size <= 1e-8 * yardstick && yardstick.is_finite() && size <= 100.0 * mode.error {
                mode.error += size;
                mode.value = Complex64::ZERO;
            }
        }
        let close = |a: &Mode, b: &Mode| (a.value - b.value).norm() <= a.error + b.error;
        let counts: Vec<usize> = modes.iter().map(|a| modes.iter().filter(|b| close(a, b)).count()).collect();
        for (index, (mode, multiplicity)) in modes.iter_mut().zip(counts).enumerate() {
            (mode.index, mode.multiplicity) = (index, multiplicity);
        }
        let wanted = match self.ask {
            Ask::Pairs(n) => Some(n),
            _ => self.ask.wanted(),
        };
        if let Some(n) = wanted.filter(|n| *n < modes.len()) {
            // A conjugate pair is never cut.
            let (last, next) = (&modes[n - 1], &modes[n]);
            let pair = !self.pencil.complex
                && last.complex
                && (last.value - next.value.conj()).norm() <= last.error + next.error;
            modes.truncate(if pair { n + 1 } else { n });
        }
    }
}

/// Columns and matrix of several candidates.
fn basis(members: &[&Start], complex: bool) -> Basis {
    let k = members.len();
    if complex {
        let vectors = members.iter().map(|m| m.fields.clone()).collect();
        let matrix = DMatrix::from_fn(k, k, |r, c| if r == c { members[r].value } else { Complex64::ZERO });
        return Basis { vectors, matrix, complex };
    }
    // A pair of conjugates that rounding made of two real ones: real and imaginary part of its vector.
    let nothing = |f: &Field| f.minus(f);
    let mut vectors: Vec<[Field; 2]> = Vec::new();
    let mut blocks: Vec<DMatrix<Complex64>> = Vec::new();
    for member in members {
        let [re, im] = &member.fields;
        if member.value.im == 0.0 {
            let single = Basis::single(member, false);
            vectors.extend(single.vectors);
            blocks.push(single.matrix);
        } else {
            let (a, b) = (Complex64::from(member.value.re), Complex64::from(member.value.im));
            vectors.push([re.clone(), nothing(re)]);
            vectors.push([im.clone(), nothing(im)]);
            blocks.push(DMatrix::from_row_slice(2, 2, &[a, b, -b, a]));
        }
    }
    let size = vectors.len();
    let mut matrix = DMatrix::from_element(size, size, Complex64::ZERO);
    let mut at = 0;
    for block in blocks {
        matrix.view_mut((at, at), block.shape()).copy_from(&block);
        at += block.nrows();
    }
    Basis { vectors, matrix, complex }
}

/// The eigenvector, largest entry 1, by inverse iteration.
fn eigenvector(matrix: &[Complex64], k: usize, value: Complex64) -> Vec<Complex64> {
    if k == 1 {
        return vec![Complex64::ONE];
    }
    let size = matrix.iter().map(|v| v.norm()).fold(f64::MIN_POSITIVE, f64::max);
    let shift = value + size * 1e-13;
    let shifted = DMatrix::from_fn(k, k, |r, c| matrix[r * k + c] - if r == c { shift } else { Complex64::ZERO });
    let lu = shifted.full_piv_lu();
    let mut vector = nalgebra::DVector::from_fn(k, |r, _| Complex64::from(1.0 + 0.137 * r as f64));
    for _ in 0..3 {
        let Some(next) = lu.solve(&vector) else { break };
        let largest = next.iter().copied().max_by(|a, b| a.norm().total_cmp(&b.norm())).unwrap_or(Complex64::ONE);
        vector = next.map(|v| v / largest);
    }
    vector.iter().copied().collect()
}

/// Real and imaginary part of a doubled field.
pub(super) fn halves(field: &Field) -> [Field; 2] {
    [0, 1].map(|part| {
        let orders: Vec<usize> = field.layout.orders().iter().copied().skip(part).step_by(2).collect();
        let layout = Layout::new(&orders, field.constants.len() / 2);
        let series = (0..field.mesh.elements.len()).map(|e| {
            let of = |(i, &m): (usize, &usize)| {
                (0..=m).map(move |k| field.series(e, 2 * i + part, k).to_vec()).collect::<Vec<_>>()
            };
            orders.iter().enumerate().flat_map(of).collect()
        });
        let constants = field.constants.iter().copied().skip(part).step_by(2).collect();
        Field::from_series(field.mesh.clone(), &layout, constants, series.collect())
    })
}

/// A field times a number; the eigenvalue behind its constants stays.
fn times(field: &Field, factor: Complex64, complex: bool) -> Field {
    let layout = &field.layout;
    let mut series = Vec::with_capacity(field.mesh.elements.len());
    let mix = |own: &[f64], other: &[f64], sign: f64| -> Vec<f64> {
        own.iter().zip(other).map(|(a, b)| factor.re * a + sign * factor.im * b).collect()
    };
    for e in 0..field.mesh.elements.len() {
        let mut jets = Vec::with_capacity(layout.jets());
        for (i, &m) in layout.orders().iter().enumerate() {
            for k in 0..=m {
                let own = field.series(e, i, k);
                jets.push(if !complex {
                    own.iter().map(|a| factor.re * a).collect()
                } else if i % 2 == 0 {
                    mix(own, field.series(e, i + 1, k), -1.0)
                } else {
                    mix(own, field.series(e, i - 1, k), 1.0)
                });
            }
        }
        series.push(jets);
    }
    let mut constants = field.constants.clone();
    if complex {
        let last = constants.len() - 2;
        for pair in constants[..last].chunks_exact_mut(2) {
            let value = Complex64::new(pair[0], pair[1]) * factor;
            (pair[0], pair[1]) = (value.re, value.im);
        }
    } else {
        let last = constants.len() - 1;
        constants[..last].iter_mut().for_each(|c| *c *= factor.re);
    }
    Field::from_series(field.mesh.clone(), layout, constants, series)
}

fn mapped(mode: &Mode, map: impl Fn(&Field) -> Result<Field>) -> Result<Solution> {
    let Solution { field, condition, passes, resolved, companions } = &mode.solution;
    let all = |fields: &[Field]| fields.iter().map(&map).collect::<Result<Vec<_>>>();
    let companions = Companions { coarser: all(&companions.coarser)?, nudged: all(&companions.nudged)? };
    Ok(Solution { field: map(field)?, condition: *condition, passes: *passes, resolved: *resolved, companions })
}

pub(super) fn scaled(mode: &Mode, number: &dyn Fn(&Field) -> Result<Complex64>) -> Result<Mode> {
    let solution = mapped(mode, |field| {
        let factor = number(field)?.inv();
        if factor.re.is_finite() && factor.im.is_finite() {
            return Ok(times(field, factor, mode.complex));
        }
        Err(Error::NotFinite { what: "the number that scales the mode".into(), x: field.mesh.span()[0] })
    })?;
    Ok(Mode { solution, ..mode.clone() })
}

/// The conjugate mode.
fn conjugate(mode: &Mode) -> Mode {
    let flipped = |field: &Field| -> Result<Field> {
        let mut result = field.combined(field, 0.0);
        result.flip_odd();
        Ok(result)
    };
    let solution = mapped(mode, flipped).unwrap_or_else(|_| mode.solution.clone());
    Mode { value: mode.value.conj(), solution, ..mode.clone() }
}
