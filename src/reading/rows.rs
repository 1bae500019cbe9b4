//! How results, absences and findings are written down.

use super::result::{Absent, BudgetTerm, Instant, ResultRow};

/// Half-width of the 95 % coverage interval over the standard uncertainty, normal (GUM, JCGM 100:2008, Table G.1).
pub(super) const COVERAGE_95: f64 = 1.96;

/// Shares of a standard uncertainty, collected one by one.
#[derive(Debug, Clone, Default)]
pub(super) struct Budget(Vec<BudgetTerm>);

impl Budget {
    /// Adds a share; a zero one is left out.
    pub(super) fn with(mut self, source: &str, standard_uncertainty: f64) -> Self {
        let share = standard_uncertainty.abs();
        if share > 0.0 {
            self.0.push(BudgetTerm { source: source.to_owned(), standard_uncertainty: share });
        }
        self
    }

    pub(super) fn total(&self) -> f64 {
        self.0.iter().map(|term| term.standard_uncertainty.powi(2)).sum::<f64>().sqrt()
    }
}

/// What a reading collects on its way.
#[derive(Debug, Clone, Default)]
pub(super) struct Book {
    pub instants: Vec<Instant>,
    pub results: Vec<ResultRow>,
    pub absent: Vec<Absent>,
    pub findings: Vec<String>,
}

impl Book {
    pub(super) fn result(&mut self, name: &str, value: f64, unit: &str, budget: Budget, method: impl Into<String>) {
        let standard_uncertainty = budget.total();
        if !(value.is_finite() && standard_uncertainty.is_finite()) {
            return self.absent(name, "the computation gave no finite number");
        }
        let mut terms = budget.0;
        terms.sort_by(|a, b| b.standard_uncertainty.total_cmp(&a.standard_uncertainty));
        self.results.push(ResultRow {
            name: name.to_owned(),
            value,
            unit: unit.to_owned(),
            standard_uncertainty,
            low: value - COVERAGE_95 * standard_uncertainty,
            high: value + COVERAGE_95 * standard_uncertainty,
            method: method.into(),
            budget: terms,
        });
    }

    pub(super) fn absent(&mut self, name: &str, reason: impl Into<String>) {
        self.absent.push(Absent { name: name.to_owned(), reason: reason.into() });
    }

    pub(super) fn instant(
        &mut self,
        name: &str,
        time_s: f64,
        standard_uncertainty_s: f64,
        evidence: impl Into<String>,
    ) {
        self.instants.push(Instant {
            name: name.to_owned(),
            time_s,
            standard_uncertainty_s,
            evidence: evidence.into(),
        });
    }
}
