//! Every module imports its own folder and lower floors only.
//!
//! The table is read from DEVELOPERS.md; every `crate::` and `super::` path in src/ outside `#[cfg(test)]` is checked.

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

type Floors = BTreeMap<String, u32>;

/// Reads lines such as `6  run/  compare/` from the block under the heading.
fn read_floors(guide: &str) -> Floors {
    let section = guide.split("## Floors").nth(1).expect("the guide has a section on floors");
    let block = section.split("```").nth(1).expect("the section has a block with the table");
    let mut floors = Floors::new();
    for line in block.lines().filter(|line| !line.trim().is_empty()) {
        let mut words = line.split([' ', ',']).filter(|word| !word.is_empty());
        let floor = words.next().unwrap().parse().expect("a line begins with its floor");
        for word in words {
            let Some(part) = word.strip_suffix('/').or_else(|| word.strip_suffix(".rs")) else { break };
            floors.insert(part.to_string(), floor);
        }
    }
    floors
}

/// The text without comments and without items under `#[cfg(test)]`.
fn product_code(text: &str) -> String {
    let lines = text.lines().map(|line| line.split("//").next().unwrap_or(""));
    let mut rest: &str = &lines.collect::<Vec<_>>().join("\n");
    let mut code = String::new();
    while let Some((before, after)) = rest.split_once("#[cfg(test)]") {
        code.push_str(before);
        let mut depth = 0;
        let end = after.char_indices().find(|&(_, c)| {
            depth += i32::from(c == '{') - i32::from(c == '}');
            depth == 0 && (c == '}' || c == ';')
        });
        rest = end.map_or("", |(place, _)| &after[place + 1..]);
    }
    code + rest
}

/// The first names of all paths from the crate's root that a file's code takes; `module` is where the file stands.
fn roots(code: &str, module: &[String]) -> Vec<String> {
    let mut found = Vec::new();
    let mut starts: Vec<(usize, usize)> = Vec::new(); // the place after the climb, and how far it climbs
    for (place, _) in code.match_indices("crate::") {
        if !code[..place].ends_with(|c: char| c.is_alphanumeric() || c == '_') {
            starts.push((place + "crate::".len(), module.len()));
        }
    }
    for (place, _) in code.match_indices("super::") {
        if code[..place].ends_with(|c: char| c.is_alphanumeric() || c == '_' || c == ':') {
            continue;
        }
        let mut rest = &code[place..];
        let mut climbs = 0;
        while let Some(after) = rest.strip_prefix("super::") {
            rest = after;
            climbs += 1;
        }
        starts.push((code.len() - rest.len(), climbs));
    }
    for (start, climbs) in starts {
        if climbs < module.len() {
            continue; // it stays within the part
        }
        let rest = code[start..].trim_start();
        if let Some(group) = rest.strip_prefix('{') {
            let mut depth = 1;
            let mut name = String::new();
            for c in group.chars() {
                depth += i32::from(c == '{') - i32::from(c == '}');
                if depth == 0 || (depth == 1 && c == ',') {
                    found.push(name.trim().split("::").next().unwrap_or("").trim().to_string());
                    name.clear();
                } else {
                    name.push(c);
                }
                if depth == 0 {
                    break;
                }
            }
        } else {
            found.push(rest.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect());
        }
    }
    found.retain(|name| !name.is_empty());
    found
}

/// What a file at this place within src/ does against the table.
fn violations(floors: &Floors, place: &str, text: &str) -> Vec<String> {
    let mut module: Vec<String> = place.trim_end_matches(".rs").split('/').map(str::to_string).collect();
    let part = module[0].clone();
    if module.last().is_some_and(|last| last == "mod" || ((last == "lib" || last == "main") && module.len() == 1)) {
        module.pop();
    }
    let Some(&own) = floors.get(&part) else { return vec![format!("{place}: `{part}` has no floor")] };
    let code = product_code(text);
    let bad = roots(&code, &module).into_iter().filter(|name| {
        // What is no part is an item of the facade.
        let floor = floors.get(name).copied().unwrap_or(floors["lib"]);
        *name != part && floor >= own && part != "main"
    });
    bad.map(|name| format!("{place}: `{part}` (floor {own}) takes from `{name}`")).collect()
}

fn sources(folder: &Path, inside: &str, found: &mut Vec<(String, String)>) {
    let mut entries: Vec<_> = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().path()).collect();
    entries.sort();
    for path in entries {
        let name = format!("{inside}{}", path.file_name().unwrap().to_str().unwrap());
        if path.is_dir() {
            sources(&path, &format!("{name}/"), found);
        } else if name.ends_with(".rs") {
            found.push((name, fs::read_to_string(&path).unwrap()));
        }
    }
}

#[test]
fn every_module_keeps_to_its_floor() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let floors = read_floors(&fs::read_to_string(root.join("DEVELOPERS.md")).unwrap());
    let mut files = Vec::new();
    sources(&root.join("src"), "", &mut files);
    assert!(files.len() > 40, "the sources were found");
    let bad: Vec<String> = files.iter().flat_map(|(place, text)| violations(&floors, place, text)).collect();
    assert!(bad.is_empty(), "{}", bad.join("\n"));
}

#[test]
fn the_checker_sees_what_is_wrong() {
    let floors = read_floors(
        "## Floors\n```\n9  main.rs, cli/   sees the facade\n8  lib.rs\n2  kernel/\n1  text/  numbers/\n```\n",
    );
    assert_eq!(floors["cli"], 9);
    let wrong = |place, text| violations(&floors, place, text).len();
    assert_eq!(wrong("text/a.rs", "use crate::kernel::Program;"), 1, "upwards");
    assert_eq!(wrong("text/a.rs", "fn f() { crate::numbers::exp(1.0) }"), 1, "a neighbour, in a path");
    assert_eq!(wrong("text/a.rs", "use crate::{text::b, kernel::{c, d}, numbers};"), 2, "in a group");
    assert_eq!(wrong("text/a.rs", "use super::super::kernel;"), 1, "climbing out");
    assert_eq!(wrong("text/mod.rs", "use super::kernel;"), 1, "climbing out of a folder's own module");
    assert_eq!(wrong("text/deep/a.rs", "use super::super::super::{kernel};"), 1, "climbing far");
    assert_eq!(wrong("text/a.rs", "use crate::Problem;"), 1, "the facade");
    assert_eq!(wrong("other/a.rs", ""), 1, "a part without a floor");
    assert_eq!(wrong("text/a.rs", "#[cfg(test)]\nmod tests { fn f() {} }\nuse crate::kernel;"), 1, "after tests");

    assert_eq!(wrong("kernel/a.rs", "use crate::{text, numbers::exp}; use super::b; use crate::kernel::c;"), 0);
    assert_eq!(wrong("kernel/deep/a.rs", "pub(in super::super) fn f() { super::super::b() }"), 0);
    assert_eq!(wrong("text/a.rs", "#[cfg(test)]\nmod tests {\n use crate::kernel::x;\n mod m { }\n}\n"), 0);
    assert_eq!(wrong("text/a.rs", "// crate::kernel is above\n#[cfg(test)]\nuse crate::kernel;\n"), 0);
}
