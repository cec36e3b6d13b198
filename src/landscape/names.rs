//! How the parts of a landscape are called in reports.

use super::{AxisRange, Landscape, UnknownFamily};

impl UnknownFamily {
    /// The name of an element: `x`, `p[2, 3]`.
    pub fn element_name(&self, element: usize) -> String {
        element_name(&self.name, &self.axes, element)
    }
}

/// The name of an element of a family, by its place row by row.
pub fn element_name(name: &str, axes: &[AxisRange], element: usize) -> String {
    if axes.is_empty() {
        return name.to_string();
    }
    let mut rest = element;
    let mut indices: Vec<String> = Vec::new();
    for axis in axes.iter().rev() {
        indices.push((axis.first + (rest % axis.count) as i64).to_string());
        rest /= axis.count;
    }
    indices.reverse();
    format!("{name}[{}]", indices.join(", "))
}

impl Landscape {
    /// The name of the unknown in a slot: `x`, `p[2, 3]`.
    pub fn slot_name(&self, slot: usize) -> String {
        let family =
            self.unknowns.iter().find(|family| (family.first_slot..family.first_slot + family.count).contains(&slot));
        family.map_or_else(|| format!("slot {slot}"), |family| family.element_name(slot - family.first_slot))
    }

    /// The number of unknowns.
    pub fn n_unknowns(&self) -> usize {
        self.slots.len()
    }
}
