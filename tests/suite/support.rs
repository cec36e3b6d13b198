//! What the tests share.

use std::sync::Arc;

use thalweg::kernel::{Kernel, compile};
use thalweg::landscape::{Landscape, check};
use thalweg::language::{parse, render};

/// The landscape of a problem text.
pub fn landscape(text: &str) -> Landscape {
    let parsed = parse(text);
    assert!(parsed.diagnostics.is_empty(), "{}", render("test.land", text, &parsed.diagnostics));
    let checked = check(&parsed.file, &[]).unwrap();
    checked.landscape.unwrap_or_else(|| panic!("{}", render("test.land", text, &checked.diagnostics)))
}

/// A landscape and its kernel.
pub fn kernel(text: &str) -> (Landscape, Arc<Kernel>) {
    let landscape = landscape(text);
    let kernel = compile(&landscape).unwrap_or_else(|error| panic!("{error}"));
    (landscape, Arc::new(kernel))
}
