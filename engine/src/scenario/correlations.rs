//! Reads `[[drug.correlation]]` and checks that all of them together are possible.

use nalgebra::DMatrix;

use super::Varies;
use super::covariates::with_near;
use super::document::Value;
use super::fields::Kind;
use super::nearest::nearest;
use super::parameters::Written;
use super::reader::{Reader, Section};
use crate::diagnostic::{Diagnostic, Span};

/// A correlation and where it stands.
struct Pair {
    first: usize,
    second: usize,
    value: f64,
    /// The whole of `between`.
    at: Span,
}

/// Reads every correlation; indices are into `written`, first smaller than second.
pub(super) fn read(reader: &mut Reader, section: &Section, written: &[Written]) -> Vec<(usize, usize, f64)> {
    let mut pairs: Vec<Pair> = Vec::new();
    for (table, span) in reader.tables(section, "correlation") {
        let own = reader.open("drug.correlation", table, span);
        let value = value(reader, &own);
        let Some((first, second, at)) = between(reader, &own, written) else { continue };
        if let Some(other) = pairs.iter().find(|pair| (pair.first, pair.second) == (first, second)) {
            let said = format!("`{}` and `{}` are correlated twice", written[first].name, written[second].name);
            reader.report(Diagnostic::error(at, said).label("again").context(other.at, "first here"));
            continue;
        }
        if let Some(value) = value {
            pairs.push(Pair { first, second, value, at });
        }
    }
    if let Some(culprit) = impossible(&pairs, written.len()) {
        let (a, b) = (written[culprit.first].name, written[culprit.second].name);
        let said = format!("with the other correlations, `{a}` and `{b}` cannot have {}", culprit.value);
        let mut fault = Diagnostic::error(culprit.at, said)
            .label("not positive definite")
            .help("Correlations of three or more parameters bound each other; weaken this one or another.");
        let touches =
            |pair: &Pair| [pair.first, pair.second].iter().any(|i| [culprit.first, culprit.second].contains(i));
        for pair in pairs.iter().filter(|pair| pair.at != culprit.at && touches(pair)) {
            fault = fault.context(pair.at, format!("{} here", pair.value));
        }
        reader.report(fault);
    }
    pairs.iter().map(|pair| (pair.first, pair.second, pair.value)).collect()
}

fn value(reader: &mut Reader, section: &Section) -> Option<f64> {
    let (value, at) = reader.number(section, "value")?;
    if value.abs() < 1.0 {
        return Some(value);
    }
    let fault = if value.abs() == 1.0 {
        Diagnostic::error(at, "a correlation of 1 or -1 makes two parameters one").label("lies on the edge")
    } else {
        Diagnostic::error(at, "a correlation lies between -1 and 1").label("out of range")
    };
    reader.report(fault);
    None
}

/// The two parameters, the first one of the file first.
fn between(reader: &mut Reader, section: &Section, written: &[Written]) -> Option<(usize, usize, Span)> {
    let entry = section.get("between")?;
    let Value::List(items) = &entry.node.value else {
        reader.wrong_kind("between", Kind::Names, &entry.node);
        return None;
    };
    if items.len() != 2 {
        let fault = Diagnostic::error(entry.node.span, "`between` wants two parameters");
        reader.report(fault.label(format!("{} here", items.len())));
        return None;
    }
    let mut places = Vec::new();
    for item in items {
        let Some((name, at)) = reader.text_of("between", Kind::Name, item) else { continue };
        let Some(place) = written.iter().position(|own| own.name == name) else {
            let fault =
                Diagnostic::error(at, format!("there is no parameter `{name}` here")).label("unknown parameter");
            reader.report_absent(with_near(fault, nearest(name, written.iter().map(|own| own.name)), at, true));
            continue;
        };
        let own = &written[place];
        if own.parameter.as_ref().is_some_and(|parameter| parameter.varies == Varies::Not) {
            let fault = Diagnostic::error(at, format!("`{name}` does not vary, so nothing goes with it"));
            let fault = fault.label("no random part").context(own.key_span, "described here");
            reader.report(fault.help("Give it a `cv`, or leave out the correlation."));
            continue;
        }
        places.push(place);
    }
    let [a, b] = places[..] else { return None };
    if a == b {
        let fault = Diagnostic::error(entry.node.span, format!("`{}` is correlated with itself", written[a].name));
        reader.report(fault.label("the same twice"));
        return None;
    }
    Some((a.min(b), a.max(b), entry.node.span))
}

/// The pair that makes the matrix impossible: the last one of the file in the first row at which a leading block fails.
fn impossible(pairs: &[Pair], size: usize) -> Option<&Pair> {
    let mut matrix = DMatrix::<f64>::identity(size, size);
    for pair in pairs {
        matrix[(pair.first, pair.second)] = pair.value;
        matrix[(pair.second, pair.first)] = pair.value;
    }
    let fails = |block: usize| matrix.view((0, 0), (block, block)).into_owned().cholesky().is_none();
    let row = (1..=size).find(|block| fails(*block))? - 1;
    pairs.iter().rev().find(|pair| pair.second == row).or(pairs.last())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn pair(first: usize, second: usize, value: f64) -> Pair {
        Pair { first, second, value, at: Span { start: 0, end: 0 } }
    }

    #[test]
    fn a_chain_closed_later_is_possible() {
        // The first two alone are impossible; the third mends them.
        let pairs = [pair(0, 1, 0.9), pair(1, 2, 0.9), pair(0, 2, 0.9)];
        assert!(impossible(&pairs, 4).is_none());
        let culprit = impossible(&pairs[..2], 4).expect("a culprit");
        assert_eq!((culprit.first, culprit.second), (1, 2));
    }
}
