//! The largest misfit in one sentence.

use super::force::Shape;
use super::residual::Residuals;

/// Residuals over their uncertainty that are nothing to speak of.
const UNREMARKABLE: f64 = 2.0;

pub(super) fn sentence(residuals: &[Residuals], shape: Option<&Shape>) -> String {
    let Some(worst) = residuals.iter().max_by(|a, b| a.max_over_u().total_cmp(&b.max_over_u())) else {
        return "there is nothing to compare the model with".to_owned();
    };
    let Some(idx) = worst.worst_idx() else { return "there is nothing to compare the model with".to_owned() };
    let times = worst.max_over_u();
    let side = if worst.residual[idx] > 0.0 { "above" } else { "below" };
    let (size, unit) = (worst.residual[idx].abs(), &worst.unit);
    let since_start_s = worst.time_s[idx] - worst.time_s[0];
    let place = format!("at x = {:.2} m, {:.0} ms into the stroke", worst.x_m[idx], 1e3 * since_start_s);
    if times < UNREMARKABLE {
        return format!(
            "model and trial agree within their uncertainty; the largest misfit is in {}: measured {size:.3} {unit} {side} the model {place} ({times:.1} times its standard uncertainty)",
            worst.quantity
        );
    }
    let hint = shape.filter(|shape| shape.explained > 0.5).map_or_else(String::new, |shape| {
        let sign = if shape.mean_n < 0.0 { "missing" } else { "in excess" };
        format!(
            "; the stroke has {:.0} N of force {sign} on average, shaped most like {}",
            shape.mean_n.abs(),
            shape.name
        )
    });
    format!(
        "the largest misfit is in {}: measured {size:.3} {unit} {side} the model {place} ({times:.1} times its standard uncertainty){hint}",
        worst.quantity
    )
}
