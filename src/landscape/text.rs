//! Terms as text, for tests and for the curious: each term with parts has a line of its own, written once.

use std::fmt::{self, Display, Formatter};

use crate::language::tree::Reduction;

use super::Landscape;
use super::term::{Affine, Index, IndexCondition, Term, TermId};

impl Display for Affine {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        let mut written = false;
        for &(level, factor) in &self.factors {
            let sign = if factor < 0 {
                "-"
            } else if written {
                "+"
            } else {
                ""
            };
            match factor.unsigned_abs() {
                1 => write!(out, "{sign}L{level}")?,
                size => write!(out, "{sign}{size}*L{level}")?,
            }
            written = true;
        }
        match (written, self.constant) {
            (true, 0) => Ok(()),
            (true, constant) => write!(out, "{constant:+}"),
            (false, constant) => write!(out, "{constant}"),
        }
    }
}

impl Display for Index {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        match self {
            Index::Affine(affine) => write!(out, "{affine}"),
            Index::Lookup { table, at } => write!(out, "lookup{table}[{at}]"),
        }
    }
}

impl Display for IndexCondition {
    fn fmt(&self, out: &mut Formatter<'_>) -> fmt::Result {
        let listed = |parts: &[IndexCondition]| parts.iter().map(|part| format!(" {part}")).collect::<String>();
        match self {
            IndexCondition::Compare(relation, left, right) => write!(out, "({} {left} {right})", relation.name()),
            IndexCondition::All(parts) => write!(out, "(all{})", listed(parts)),
            IndexCondition::Any(parts) => write!(out, "(any{})", listed(parts)),
            IndexCondition::Not(part) => write!(out, "(not {part})"),
        }
    }
}

impl Landscape {
    /// The let families, the objective and the shown quantities as text, one term a line, parts before wholes.
    pub fn print_terms(&self) -> String {
        let mut text = String::new();
        let mut known = vec![false; self.terms.len()];
        for (number, family) in self.families.iter().enumerate() {
            let body = self.print_term(family.body, &mut known, &mut text);
            let loops: Vec<String> = family.loops.iter().map(|(first, last)| format!("{first}..{last}")).collect();
            let (name, place) = (&family.name, &family.place);
            text.push_str(&format!("family{number} {name} over {}: [{place}] = {body}\n", loops.join(", ")));
        }
        let objective = self.print_term(self.objective, &mut known, &mut text);
        text.push_str(&format!("minimise {objective}\n"));
        for show in &self.shows {
            for &element in &show.elements {
                let element = self.print_term(element, &mut known, &mut text);
                text.push_str(&format!("show {} {element}\n", show.name));
            }
        }
        text
    }

    /// The name of a term, or the term itself where it has no parts; lines for what it needs are written first.
    fn print_term(&self, id: TermId, known: &mut [bool], text: &mut String) -> String {
        let term = self.terms.get(id);
        match term {
            Term::Constant(bits) => return format!("{:?}", f64::from_bits(*bits)),
            Term::Counter(index) => return format!("({index})"),
            Term::Table(table, index) => return format!("table{table}[{index}]"),
            Term::Unknown(index) => return format!("x[{index}]"),
            Term::Family(family, index) => return format!("family{family}[{index}]"),
            _ => {}
        }
        let name = format!("t{}", id.0);
        if std::mem::replace(&mut known[id.0 as usize], true) {
            return name;
        }
        let parts: Vec<TermId> = term.parts().collect();
        let parts: Vec<String> = parts.into_iter().map(|part| self.print_term(part, known, text)).collect();
        let parts = parts.join(" ");
        let line = match term {
            Term::Unary(operation, _) => format!("{} {parts}", operation.name()),
            Term::Binary(operation, ..) => format!("{} {parts}", operation.name()),
            Term::Power(_, exponent) => format!("{parts}^{exponent}"),
            Term::Reduce { operator, level, first, last, condition, .. } => {
                let only = condition.as_ref().map_or(String::new(), |condition| format!(" if {condition}"));
                let word = match operator {
                    Reduction::Sum => "sum",
                    Reduction::Product => "product",
                    Reduction::Minimum => "min",
                    Reduction::Maximum => "max",
                };
                format!("{word} L{level} in {first}..{last}{only}: {parts}")
            }
            Term::Choose { condition, .. } => format!("choose {condition} {parts}"),
            Term::Select { relation, .. } => format!("select {} {parts}", relation.name()),
            _ => parts,
        };
        text.push_str(&format!("{name} = {line}\n"));
        name
    }
}
