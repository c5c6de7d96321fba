//! Infinite spans: cut far out, and further out, until no asked number moves any more.
//!
//! `inf` is a constant of its own in every formula, with the place of the cut as its value; each field carries the place at
//! which its own span was cut. The mesh adapts to what is out there, so that a span twice as long costs a few elements.
//! The solution on the span half as long is one of the companions that bars are made from: the truncation is in the bar.

use super::functional::Memory;
use super::{DataFile, Reading, Sheet, read_with};
use crate::error::{Error, Result};
use crate::field::Field;
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Release};
use crate::solve::{Solution, Watch, boundary};

/// How often the span is doubled.
const DOUBLINGS: usize = 26;
/// Failures in a row after which no longer span is tried.
const FAILURES: usize = 8;

/// What it takes to read a sheet again.
#[derive(Debug, Clone)]
pub(super) struct Again {
    text: String,
    held: Vec<String>,
    replaced: Vec<(String, String)>,
    files: Vec<DataFile>,
}

impl Again {
    pub fn new(text: &str, reading: &Reading<'_>) -> Self {
        Self {
            text: text.to_owned(),
            held: reading.held.iter().map(|name| (*name).to_owned()).collect(),
            replaced: reading.replaced.iter().map(|(name, text)| ((*name).to_owned(), (*text).to_owned())).collect(),
            files: reading.files.to_vec(),
        }
    }

    /// The sheet with its infinite ends cut at another place.
    fn cut_at(&self, far: f64) -> Result<Sheet> {
        let held: Vec<&str> = self.held.iter().map(String::as_str).collect();
        let replaced: Vec<(&str, &str)> = self.replaced.iter().map(|(n, t)| (n.as_str(), t.as_str())).collect();
        let reading = Reading { held: &held, replaced: &replaced, files: &self.files, far: Some(far) };
        read_with(&self.text, &reading).map_err(|faults| {
            Error::Unsupported(faults.first().map_or_else(String::new, |fault| fault.message.clone()))
        })
    }
}

/// Solves a sheet with infinite ends; `values` are those of the data held.
pub(super) fn solve(sheet: &Sheet, again: &Again, values: &[f64], watch: Option<Watch<'_>>) -> Result<Solution> {
    let settings = sheet.settings(watch);
    let mut far = sheet.far.unwrap_or(1.0);
    let mut last: Option<(Solution, Vec<Option<f64>>)> = None;
    let (mut first_error, mut failures) = (None, 0);
    for _ in 0..DOUBLINGS {
        let cut = again.cut_at(far)?;
        let model = cut.model_at(values.to_vec());
        let solved = match &last {
            Some((before, _)) if !model.linear() => {
                boundary(&Onward { model: &model, before: &before.field }, &settings).or_else(|e| match e {
                    Error::Interrupted => Err(Error::Interrupted),
                    _ => boundary(&model, &settings),
                })
            }
            _ => boundary(&model, &settings),
        };
        match solved {
            Ok(mut solution) => {
                solution.carry(&cut.behind(values));
                let numbers = sheet.outline(&solution.field);
                if let Some((before, old)) = last.take() {
                    let settled = sheet.settled(&old, &numbers, &solution.field);
                    solution.accompany(before.field.clone());
                    if settled {
                        return Ok(solution);
                    }
                }
                last = Some((solution, numbers));
                failures = 0;
            }
            Err(Error::Interrupted) => return Err(Error::Interrupted),
            Err(error) => {
                first_error.get_or_insert(error);
                failures += 1;
                if failures >= FAILURES {
                    break;
                }
            }
        }
        far *= 2.0;
    }
    match (last, first_error) {
        // Not settled: the bars, made from two spans, say by how much.
        (Some((solution, _)), _) => Ok(solution),
        (None, Some(error)) => Err(error),
        (None, None) => Err(Error::NoSolution { tried: "no span was long enough".into() }),
    }
}

impl Sheet {
    /// Constants behind the unknown ones: held data, then the place of the cut.
    pub(super) fn behind(&self, values: &[f64]) -> Vec<f64> {
        values.iter().copied().chain(self.far).collect()
    }

    /// The asked numbers on one field.
    fn outline(&self, field: &Field) -> Vec<Option<f64>> {
        self.report.iter().map(|item| item.reckoner.number(field, &Memory::default()).ok().map(|n| n.value)).collect()
    }

    /// Whether no number has moved by more than a part of the accuracy asked.
    fn settled(&self, old: &[Option<f64>], new: &[Option<f64>], field: &Field) -> bool {
        self.report.iter().zip(old.iter().zip(new)).all(|(item, pair)| match pair {
            (Some(a), Some(b)) => {
                let scale = item.reckoner.scale(field).unwrap_or(0.0).max(b.abs());
                (a - b).abs() <= 0.1 * self.relative * scale
            }
            (None, None) => true,
            _ => false,
        })
    }
}

/// A model that starts from the solution on a shorter span, continued beyond its ends as a constant.
struct Onward<'a> {
    model: &'a dyn Model,
    before: &'a Field,
}

impl Model for Onward<'_> {
    fn layout(&self) -> &Layout {
        self.model.layout()
    }

    fn points(&self) -> &[f64] {
        self.model.points()
    }

    fn linear(&self) -> bool {
        self.model.linear()
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        self.model.equations(batch, out)
    }

    fn conditions(&self) -> &[Condition] {
        self.model.conditions()
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        self.model.condition(index, jets, constants, out)
    }

    fn releases(&self) -> &[Release] {
        self.model.releases()
    }

    fn equation_rounding(&self, batch: &Batch<'_>, out: &mut Linearised) -> bool {
        self.model.equation_rounding(batch, out)
    }

    fn condition_rounding(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> bool {
        self.model.condition_rounding(index, jets, constants, out)
    }

    fn open(&self) -> [bool; 2] {
        self.model.open()
    }

    fn written_out(&self, equation: usize) -> bool {
        self.model.written_out(equation)
    }

    fn admissible(&self, x: f64, jets: &[f64], constants: &[f64]) -> bool {
        self.model.admissible(x, jets, constants)
    }

    fn guess(&self, x: f64, piece: usize) -> Option<Vec<f64>> {
        let [from, to] = self.before.mesh.span();
        let layout = self.layout();
        let inside = x.clamp(from, to);
        let element = self.before.locate_in(inside, piece, 0);
        let place = self.before.element(element);
        let mut jets = self.before.jets(element, place.reference(inside), layout.orders());
        let beyond = x - inside;
        if beyond != 0.0 {
            for (i, &m) in layout.orders().iter().enumerate() {
                // The highest derivative but one goes on; with it the slope of a line or the value of a constant.
                jets[layout.jet(i, m)] = 0.0;
                for k in (0..m).rev() {
                    let slope = if k + 1 < m { jets[layout.jet(i, k + 1)] } else { 0.0 };
                    jets[layout.jet(i, k)] += beyond * slope;
                }
            }
        }
        Some(jets)
    }

    fn guessed_constants(&self) -> Option<Vec<f64>> {
        Some(self.before.constants[..self.layout().constants()].to_vec())
    }

    fn unknown_name(&self, unknown: usize) -> String {
        self.model.unknown_name(unknown)
    }

    fn equation_name(&self, equation: usize) -> String {
        self.model.equation_name(equation)
    }
}
