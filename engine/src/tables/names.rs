//! Names and units that tables and summaries share.

use crate::quantity::to_f64;
use crate::scenario::{AmountUnit, Scenario};

/// The unit in which amounts are counted.
pub fn amount_unit(unit: AmountUnit) -> &'static str {
    match unit {
        AmountUnit::Milligram => "mg",
        AmountUnit::International => "[IU]",
        AmountUnit::Mole => "mol",
    }
}

/// The limits of the window in the scenario's unit of concentration.
pub fn window_limits(scenario: &Scenario) -> Option<(Option<f64>, Option<f64>)> {
    let window = scenario.window.as_ref()?;
    let factor = to_f64(&scenario.output.concentration.factor);
    let limit = |value: Option<f64>| value.map(|value| tidy(value / factor));
    Some((limit(window.low), limit(window.high)))
}

/// The window in words, as in "2 to 8 mg/L".
pub fn window(scenario: &Scenario) -> Option<String> {
    let unit = &scenario.output.concentration.text;
    match window_limits(scenario)? {
        (Some(low), Some(high)) => Some(format!("{low} to {high} {unit}")),
        (Some(low), None) => Some(format!("at least {low} {unit}")),
        (None, Some(high)) => Some(format!("at most {high} {unit}")),
        (None, None) => None,
    }
}

/// The number with twelve significant digits: what was written in decimals comes back as it was written after a change
/// of units.
pub fn tidy(value: f64) -> f64 {
    format!("{value:.11e}").parse().unwrap_or(value)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::scenario::Window;
    use crate::tables::testing;

    #[test]
    fn a_window_reads_as_it_was_written() {
        let mut scenario = testing::scenario();
        assert_eq!(window(&scenario).unwrap(), "2 to 8 mg/L");
        scenario.output.concentration = testing::unit("ug/L", 1, 1000);
        scenario.window = Some(Window { low: Some(0.05), high: None });
        assert_eq!(window(&scenario).unwrap(), "at least 50 ug/L");
        scenario.window = Some(Window { low: None, high: Some(0.3) });
        assert_eq!(window(&scenario).unwrap(), "at most 300 ug/L");
        scenario.window = None;
        assert_eq!(window(&scenario), None);
    }
}
