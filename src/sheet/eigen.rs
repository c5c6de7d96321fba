//! Eigenproblems of a sheet: the parameter and its unit, what is asked, modes normalised, complex numbers of a mode.

use super::along::Along;
use super::assemble::Assembler;
use super::condition::Read;
use super::fault::Faults;
use super::functional::{Memory, Reckoner};
use super::lower::Meaning;
use super::source::{Declared, Entry, Located, Source, Wish};
use super::{Reading, Sheet, Wanted};
use crate::error::{Error, Result};
use crate::field::Field;
use crate::formula::graph::{Inputs, NodeId};
use crate::formula::syntax::{self, Expression, Kind, Operator};
use crate::model::{Profile, Side};
use crate::quantity::{self, Estimate};
use crate::solve::{Ask, Mode, Spectrum, Watch};
use crate::unit::{Dimension, Unit};
use num_complex::Complex64;

/// What a sheet says about its eigenproblem.
pub struct EigenSheet {
    /// Name of the parameter.
    pub parameter: String,
    /// Unit to print it in.
    pub unit: Unit,
    /// Which eigenvalues are wanted, in SI.
    pub ask: Ask,
    /// Numbers of the modes to be shown, from 1; all where there are none.
    pub modes: Vec<usize>,
    /// What is to be 1, where the sheet says so.
    pub(super) normalise: Option<Reckoner>,
    /// Slope of the first unknown, where it has one that is a state.
    pub(super) slope: Option<Along>,
    /// For each line of the report, the formula of the parameter that it is, if it is one.
    pub(super) forms: Vec<Option<Form>>,
}

/// Puts the parameter behind the unknown constants.
fn declare(source: &mut Source, unit: &str) {
    let Some(eigen) = &source.eigen else { return };
    let name = eigen.parameter.text.trim().to_owned();
    let span = eigen.parameter.span.clone();
    let unit = eigen.unit.clone().unwrap_or_else(|| Located::elsewhere(span.clone(), unit));
    let value = Declared { unit, constant: true, guess: None, above: None, below: None };
    source.unknowns.push(Entry { name, name_span: span, value });
}

/// Assembles the sheet; an eigenparameter without unit is first taken for a pure number, then for what makes the sums
/// agree.
pub(super) fn assembled(source: &mut Source, reading: &Reading<'_>, faults: &mut Faults) -> Option<Sheet> {
    let Some(section) = source.eigen.clone() else { return Assembler::new(source, reading, faults).run() };
    let place = section.parameter.span.clone();
    if !reading.held.is_empty() || !source.cases.is_empty() || source.path.is_some() {
        let message = "load cases, paths and data held open of an eigenproblem are not part of this version";
        faults.add("not yet", place, message, None);
        return None;
    }
    if source.infinite() {
        let message =
            "eigenproblems on an infinite span are not part of this version: the spectrum may be continuous there";
        faults.add("not yet", place, message, Some("write a finite span".into()));
        return None;
    }
    let unknowns = source.unknowns.clone();
    let mut attempt = |unit: &str| {
        source.unknowns.clone_from(&unknowns);
        declare(source, unit);
        let mut found = Faults::default();
        let sheet = Assembler::new(source, reading, &mut found).run();
        (sheet, found)
    };
    let mut best = attempt("1");
    if section.unit.is_none()
        && let Some(&(p, q)) = best.1.unequal.first()
    {
        for dimension in dimensions(p, q) {
            let next = attempt(&dimension.usual_unit());
            if next.1.unequal.len() < best.1.unequal.len() {
                best = next;
            }
            if best.1.unequal.is_empty() {
                break;
            }
        }
        if !best.1.unequal.is_empty() {
            let message = format!("what `{}` measures does not follow from the equations", section.parameter.text);
            best.1.add("eigen", place, message, Some("write unit = \"rad^2/s^2\" or the like".into()));
        }
    }
    faults.append(best.1, "");
    best.0
}

/// What the parameter may measure where `p` was set against `q` while it was taken for a pure number.
fn dimensions(p: Dimension, q: Dimension) -> Vec<Dimension> {
    let ratio = |a: Dimension, b: Dimension| a.div(b).ok();
    let both = [ratio(p, q), ratio(q, p)];
    let roots = both.iter().map(|d| d.and_then(|d| d.powr(1, 2).ok()));
    both.iter().copied().chain(roots).flatten().collect()
}

/// A function of the parameter, for complex values.
#[derive(Debug, Clone)]
pub(super) enum Form {
    Number(f64),
    Parameter,
    Negate(Box<Form>),
    Binary(Operator, Box<Form>, Box<Form>),
    Call(fn(Complex64) -> Complex64, Box<Form>),
}

impl Form {
    fn value(&self, at: Complex64) -> Complex64 {
        match self {
            Form::Number(value) => Complex64::from(*value),
            Form::Parameter => at,
            Form::Negate(a) => -a.value(at),
            Form::Call(function, a) => function(a.value(at)),
            Form::Binary(operator, a, b) => {
                let (p, q) = (a.value(at), b.value(at));
                match operator {
                    Operator::Add => p + q,
                    Operator::Subtract => p - q,
                    Operator::Multiply => p * q,
                    Operator::Divide => p / q,
                    Operator::Power if q.im == 0.0 && q.re.fract() == 0.0 && q.re.abs() < 64.0 => p.powi(q.re as i32),
                    Operator::Power => p.powc(q),
                }
            }
        }
    }
}

/// Functions of one number that a formula of a complex parameter may hold.
fn function(name: &str) -> Option<fn(Complex64) -> Complex64> {
    Some(match name {
        "re" => |z| Complex64::from(z.re),
        "im" => |z| Complex64::from(z.im),
        "conj" => |z| z.conj(),
        "arg" => |z| Complex64::from(z.arg()),
        "abs" => |z| Complex64::from(z.norm()),
        "sqrt" => |z| z.sqrt(),
        "exp" => |z| z.exp(),
        "ln" => |z| z.ln(),
        "sin" => |z| z.sin(),
        "cos" => |z| z.cos(),
        "tan" => |z| z.tan(),
        "sinh" => |z| z.sinh(),
        "cosh" => |z| z.cosh(),
        "tanh" => |z| z.tanh(),
        _ => return None,
    })
}

impl Assembler<'_, '_> {
    /// Index of the parameter among the constants.
    fn parameter(&self) -> Option<u16> {
        self.source.eigen.as_ref()?;
        self.lowerer.constants.len().checked_sub(1).map(|k| k as u16)
    }

    /// What is to be 1, as a last line of the report.
    pub(super) fn normalisation(&mut self) -> Option<Wanted> {
        let at = self.source.eigen.as_ref()?.normalise.as_ref()?;
        let (left, right) = match syntax::parse_equation(&at.text) {
            Ok(sides) => sides,
            Err(error) => {
                let hint = "write normalise = \"integral(rho*A*y^2) = 1\"";
                return self.lowerer.fault("syntax", at, &error.span.clone(), error.message, hint);
            }
        };
        let (a, b) = (self.lowerer.lower(at, &left), self.lowerer.lower(at, &right));
        let (a, b) = (a?, b?);
        self.lowerer.scalar(at, &left, a)?;
        let size = self.lowerer.shown_number(b.node);
        if !size.is_some_and(|s| s.is_finite() && s != 0.0) {
            let message = "a mode is made to have a size: a number other than 0 stands on the right";
            return self.lowerer.fault("eigen", at, &right.span, message, "write = 1, or = 1 mm");
        }
        if a.dimension.is_some() && b.dimension.is_some_and(|d| !d.is_none()) {
            self.lowerer.equal(at, (&left, a), (&right, b))?;
        }
        let node = self.lowerer.graph.divide(a.node, b.node);
        let unit = Unit::si(Dimension::default());
        Some(Wanted { label: "normalise".into(), formula: at.text.clone(), node, unit })
    }

    /// Refuses terms without an unknown, and a parameter that stands nowhere.
    pub(super) fn check_eigen(&mut self, nodes: &[NodeId], reads: &[Read], points: &[f64]) {
        let (Some(parameter), Some(eigen)) = (self.parameter(), &self.source.eigen) else { return };
        let ties: Vec<(NodeId, Located)> = reads.iter().filter_map(|r| Some((r.node?, r.at.clone()))).collect();
        let slots = self.lowerer.all_slots(&ties.iter().map(|t| t.0).collect::<Vec<_>>());
        let asked = slots.iter().map(|s| self.lowerer.functionals[*s as usize].expression);
        let mut all = nodes.iter().copied().chain(ties.iter().map(|t| t.0)).chain(asked);
        if !all.any(|node| self.lowerer.graph.constants_of(node).contains(&parameter)) {
            let message = format!("`{}` stands in no equation and no condition", eigen.parameter.text);
            let hint = "the eigenvalue must appear in the equations or conditions";
            self.lowerer.faults.add("eigen", eigen.parameter.span.clone(), message, Some(hint.into()));
            return;
        }
        let count = self.lowerer.functionals.len();
        let constants = usize::from(parameter) + 1;
        let places: Vec<f64> =
            points.windows(2).flat_map(|p| [0.137, 0.385, 0.871].map(|part| p[0] + part * (p[1] - p[0]))).collect();
        let mut inhomogeneous: Vec<Located> = Vec::new();
        let equations = self.source.equations.iter().map(|e| e.value.clone());
        let tied = ties.into_iter().map(|(node, at)| (node, at, true));
        for (node, at, here) in nodes.iter().copied().zip(equations).map(|(n, at)| (n, at, false)).chain(tied) {
            let node = self.lowerer.graph.expand(node);
            let of_unknowns = self.lowerer.graph.depends_on(node);
            let left = [0.7137, -1.9173].iter().any(|value| {
                let mut values = vec![0.0; constants];
                values[constants - 1] = *value;
                let slots = vec![0.0; count];
                let at = if here { &places[..1] } else { &places[..] };
                at.iter().any(|x| {
                    let inputs = Inputs { jets: &|_, _| 0.0, constants: &values, slots: &slots, ..Inputs::at(*x) };
                    let rest = self.lowerer.graph.evaluate::<f64>(node, &inputs);
                    rest.is_finite() && rest != 0.0
                })
            });
            if left || !(of_unknowns.unknowns() || here) {
                inhomogeneous.push(at);
            }
        }
        for at in inhomogeneous {
            let message = "a term without any unknown stands here: an eigenproblem is homogeneous";
            let hint = "leave loads and prescribed values away; they do not change eigenvalues";
            self.lowerer.fault::<()>("eigen", &at, &(0..at.text.len()), message, hint);
        }
    }

    /// A number in the unit of the parameter, in SI.
    fn limit(&mut self, at: &Located) -> Option<f64> {
        let dimension = self.lowerer.constants.last()?.unit.dimension;
        let formula = self.lowerer.parse(at)?;
        let typed = self.lowerer.lower(at, &formula.tree)?;
        let value = self.lowerer.number_of(typed.node);
        let Some(value) = value.filter(|v| v.is_finite()) else {
            return self.lowerer.fault("eigen", at, &formula.tree.span, "this must be a number", "");
        };
        // A bare number counts in the unit of the parameter.
        if typed.dimension.is_none_or(Dimension::is_none) {
            return self.lowerer.constants.last().map(|c| c.unit.to_si(value));
        }
        self.lowerer.expect(at, &formula.tree, typed, Some(dimension))?;
        Some(value)
    }

    /// What is asked, in SI.
    pub(super) fn eigen_sheet(&mut self, orders: &[usize], points: &[f64]) -> Option<EigenSheet> {
        let source = self.source;
        let section = source.eigen.as_ref()?;
        let ask = match &section.wish {
            Wish::Lowest(n) => Ask::Lowest(*n),
            Wish::LargestReal(n) => Ask::LargestReal(*n),
            Wish::LargestImaginary(n) => Ask::LargestImaginary(*n),
            Wish::Pairs(n) => Ask::Pairs(*n),
            Wish::Near(at, n) => Ask::Near(Complex64::from(self.limit(at)?), *n),
            Wish::Between([from, to]) => {
                let (a, b) = (self.limit(from), self.limit(to));
                let (a, b) = (a?, b?);
                if a >= b {
                    let message = "the first limit is not below the second";
                    return self.lowerer.fault(
                        "eigen",
                        from,
                        &(0..from.text.len()),
                        message,
                        "write the smaller first",
                    );
                }
                Ask::Between(a, b)
            }
        };
        let slope = (orders.first().is_some_and(|m| *m >= 2)).then(|| {
            let slope = self.lowerer.graph.jet(0, 1);
            Along::new(&mut self.lowerer.graph, slope, orders.len(), points)
        });
        let mut forms = Vec::new();
        for entry in &source.report {
            let tree = syntax::parse_report(&entry.value.text).ok().map(|parts| parts.0);
            forms.push(tree.and_then(|tree| self.form(&entry.value, &tree, 0)));
        }
        let parameter = section.parameter.text.trim().to_owned();
        let unit = self.lowerer.constants.last()?.unit.clone();
        Some(EigenSheet { parameter, unit, ask, modes: section.modes.clone(), normalise: None, slope, forms })
    }

    /// A formula of the parameter and data alone.
    fn form(&mut self, at: &Located, e: &Expression, depth: usize) -> Option<Form> {
        if depth > 200 {
            return None;
        }
        let typed = self.lowerer.lower(at, e)?;
        let number = self.lowerer.shown_number(typed.node).filter(|v| v.is_finite()).map(Form::Number);
        // Taken only where no parameter is inside: im(lambda) is 0 for the real graph.
        match &e.kind {
            Kind::Number { .. } => number,
            Kind::Name(name) => match self.lowerer.meanings.get(name).cloned().unwrap_or(Meaning::Coordinate) {
                Meaning::Constant(k) if Some(k) == self.parameter() => Some(Form::Parameter),
                Meaning::Formula(formula) => self.form(&formula.at, &formula.tree, depth + 1),
                Meaning::Constant(_) => None,
                _ => number,
            },
            Kind::Negate(a) => Some(Form::Negate(Box::new(self.form(at, a, depth + 1)?))),
            Kind::Binary(operator, a, b) => {
                let (a, b) = (self.form(at, a, depth + 1)?, self.form(at, b, depth + 1)?);
                Some(Form::Binary(*operator, Box::new(a), Box::new(b)))
            }
            Kind::Call { name, primes: 0, arguments, .. } if arguments.len() == 1 => {
                let argument = self.form(at, &arguments[0].value, depth + 1)?;
                match function(name) {
                    Some(function) => Some(Form::Call(function, Box::new(argument))),
                    None => number.filter(|_| matches!(argument, Form::Number(_))),
                }
            }
            Kind::Call { primes: 0, arguments, .. } => {
                let mut forms = arguments.iter().map(|a| self.form(at, &a.value, depth + 1));
                if forms.all(|f| matches!(f, Some(Form::Number(_)))) { number } else { None }
            }
            _ => None,
        }
    }
}

impl Sheet {
    /// The eigenproblem, if the sheet is one.
    pub fn eigen(&self) -> Option<&EigenSheet> {
        self.eigen.as_ref()
    }

    /// Eigenvalues and modes of an eigen sheet, normalised as asked.
    ///
    /// # Errors
    /// Those of [`crate::solve::eigen()`]; `Unsupported` for a sheet without `[eigen]`.
    ///
    /// # Example
    /// ```
    /// let sheet = spanwise::sheet::read(r#"
    /// [given]
    /// c = "340 m/s"
    /// [span]
    /// x = ["0 m", "2 m"]
    /// [unknowns]
    /// p = "Pa"
    /// [equations]
    /// pipe = "c^2*p'' + lambda*p = 0"
    /// [conditions]
    /// open = ["p(0 m) = 0", "p(2 m) = 0"]
    /// [eigen]
    /// parameter = "lambda"
    /// lowest = 2
    /// [report]
    /// frequency = "sqrt(lambda)/(2*pi) in Hz"
    /// "#).expect("no faults");
    /// let spectrum = sheet.solve_modes(None)?;
    /// let second = sheet.evaluate(&spectrum.modes[1].solution).remove(0).printed().expect("a value");
    /// assert!((second.value - 170.0).abs() <= second.error && second.error < 1e-8);
    /// # Ok::<(), spanwise::error::Error>(())
    /// ```
    pub fn solve_modes(&self, watch: Option<Watch<'_>>) -> Result<Spectrum> {
        let Some(eigen) = &self.eigen else {
            return Err(Error::Unsupported("this sheet has no section [eigen]".into()));
        };
        let mut spectrum = crate::solve::eigen(&self.model, eigen.ask, &self.settings(watch))?;
        let shown = |k: usize| eigen.modes.is_empty() || eigen.modes.contains(&(k + 1));
        let missing = eigen.modes.iter().find(|m| **m > spectrum.modes.len());
        if let Some(missing) = missing {
            let found = spectrum.modes.len();
            return Err(Error::Unsupported(format!("mode {missing} is asked for, but only {found} are found")));
        }
        let modes = std::mem::take(&mut spectrum.modes);
        let wanted = modes.into_iter().enumerate().filter(|(k, _)| shown(*k));
        spectrum.modes = wanted.map(|(_, mode)| self.normalised(eigen, mode)).collect::<Result<_>>()?;
        Ok(spectrum)
    }

    /// A mode of the size asked, its largest deflection positive.
    fn normalised(&self, eigen: &EigenSheet, mode: Mode) -> Result<Mode> {
        let mode = self.peak_one(mode)?;
        let Some(reckoner) = eigen.normalise.as_ref().filter(|_| !mode.complex) else { return Ok(mode) };
        let number = |field: &Field| -> Result<f64> { Ok(reckoner.number(field, &Memory::default())?.value) };
        // How the number grows with the mode tells by what the mode must be divided.
        let once = number(&mode.solution.field)?;
        let half = mode.scaled(|_| Ok(Complex64::from(2.0)))?;
        let degree = (once / number(&half.solution.field)?).log2().round();
        let odd = degree.rem_euclid(2.0) == 1.0;
        if !(degree.is_finite() && degree >= 1.0) || (once < 0.0 && !odd) {
            let reason =
                "`normalise` cannot give this mode its size: what is on the left vanishes or has the wrong sign";
            return Err(Error::Unsupported(reason.into()));
        }
        mode.scaled(|field| {
            let number = number(field)?;
            Ok(Complex64::from(number.signum() * number.abs().powf(degree.recip())))
        })
    }

    /// The largest value of the first unknown that is not zero is 1.
    fn peak_one(&self, mode: Mode) -> Result<Mode> {
        let parts = |field: &Field| match mode.complex {
            true => Mode::parts(field).to_vec(),
            false => vec![field.clone()],
        };
        let at = |field: &Field, profile: &dyn Profile, x: f64, side: Side| -> Result<Complex64> {
            let values = parts(field)
                .iter()
                .map(|f| Ok(quantity::value_at(f, profile, x, side)?.value))
                .collect::<Result<Vec<f64>>>()?;
            Ok(Complex64::new(values[0], values.get(1).copied().unwrap_or(0.0)))
        };
        let functions = self.statement.carried.len();
        for (_, _, profile) in self.curves().take(functions.max(1)) {
            let Some((x, side)) = peak(&parts(&mode.solution.field), profile)? else { continue };
            let value = at(&mode.solution.field, profile, x, side)?;
            let bar = mode
                .solution
                .estimate(|field| Ok(Estimate { value: at(field, profile, x, side)?.norm(), error: 0.0 }))?;
            if value.norm() > 100.0 * bar.error {
                return mode.scaled(|field| at(field, profile, x, side));
            }
        }
        Ok(mode)
    }

    /// Places where the first unknown of a mode is zero, and where it has an extreme (SI).
    pub fn nodes_and_antinodes(&self, mode: &Mode) -> [Vec<f64>; 2] {
        let field = &mode.solution.field;
        let [from, to] = field.mesh.span();
        let found = |profile: &dyn Profile| -> Vec<f64> {
            let roots = quantity::roots(field, profile, from, to).unwrap_or_default();
            roots.iter().map(|r| r.value).collect()
        };
        if mode.complex {
            return [Vec::new(), Vec::new()];
        }
        let nodes = self.curves().next().map(|(_, _, profile)| found(profile)).unwrap_or_default();
        let slope = self.eigen.as_ref().and_then(|e| e.slope.as_ref());
        [nodes, slope.map(|s| found(s)).unwrap_or_default()]
    }

    /// The lines of the report that are formulas of the parameter, for a complex eigenvalue: value and bar in the unit of
    /// each line.
    pub fn complex_numbers(&self, mode: &Mode) -> Vec<Option<(Complex64, f64)>> {
        let Some(eigen) = &self.eigen else { return Vec::new() };
        let one = |(form, item): (&Option<Form>, &super::Item)| {
            let form = form.as_ref()?;
            let value = form.value(mode.value);
            let turns = [Complex64::ONE, Complex64::I, -Complex64::ONE, -Complex64::I];
            let spread = turns.iter().map(|t| (form.value(mode.value + t * mode.error) - value).norm());
            // The bar is small beside the distance to where the formula bends: half as much again contains that.
            let error = 1.5 * spread.fold(0.0, f64::max) + 8.0 * f64::EPSILON * value.norm();
            let scale = |v: f64| item.unit.difference_from_si(v);
            let (value, error) = (Complex64::new(scale(value.re), scale(value.im)), scale(error));
            (value.re.is_finite() && value.im.is_finite() && error.is_finite()).then_some((value, error))
        };
        eigen.forms.iter().zip(&self.report).map(one).collect()
    }
}

/// Where a real or complex profile is largest; of two equal peaks the positive one.
fn peak(parts: &[Field], profile: &dyn Profile) -> Result<Option<(f64, Side)>> {
    let [from, to] = parts[0].mesh.span();
    let side = |side: Option<Side>, x: f64| side.unwrap_or(if x <= from { Side::Right } else { Side::Left });
    if let [field] = parts {
        let high = quantity::maximum(field, profile, from, to, None)?;
        let low = quantity::minimum(field, profile, from, to, None)?;
        let (up, down) = (high.value.value, -low.value.value);
        let taken = if up >= down * (1.0 - 1e-9) { high } else { low };
        let x = taken.place.value;
        return Ok(Some((x, side(taken.side, x))));
    }
    let size = |x: f64| -> Result<f64> {
        let values = parts.iter().map(|f| Ok(quantity::value_at(f, profile, x, Side::Left)?.value.powi(2)));
        values.sum::<Result<f64>>()
    };
    let mut best: Option<(f64, f64)> = None;
    for k in 1..=400 {
        let x = from + (to - from) * f64::from(k) / 400.0;
        let value = size(x)?;
        if best.is_none_or(|(_, b)| value > b) {
            best = Some((x, value));
        }
    }
    Ok(best.map(|(x, _)| (x, Side::Left)))
}
