//! What must hold of the tree of files itself: its notes name what there is, nothing in
//! it is left over, and everything it is built from may be passed on.

use std::collections::{BTreeSet, HashMap};
use std::fs;
use std::path::Path;
use std::process::Command;

use clap::CommandFactory;
use serde_json::Value;

const ROOT: &str = env!("CARGO_MANIFEST_DIR");

/// Licences that ask for no more than to be named. MPL-2.0 covers only its own files
/// and is accepted in what tests use, which is not passed on.
const PERMISSIVE: [&str; 9] = [
    "0BSD",
    "Apache-2.0",
    "BSD-2-Clause",
    "BSD-3-Clause",
    "BSL-1.0",
    "ISC",
    "MIT",
    "Unicode-3.0",
    "Zlib",
];

#[test]
fn the_developers_notes_explain_everything_at_the_top_and_every_group_of_code() {
    let notes = read("DEVELOPERS.md");
    let mut places = BTreeSet::new();
    for file in files() {
        let parts: Vec<&str> = file.split('/').collect();
        match parts.as_slice() {
            ["src", group, _, ..] => places.insert(format!("src/{group}/")),
            [folder, _, ..] => places.insert(format!("{folder}/")),
            _ => places.insert(file.clone()),
        };
    }
    places.remove("src/");
    for place in places {
        assert!(
            notes.contains(&place),
            "DEVELOPERS.md says nothing of {place}"
        );
    }
}

#[test]
fn the_readme_and_the_checks_use_the_same_commands() {
    let readme = read("README.md");
    let lines: Vec<&str> = readme.lines().map(str::trim).collect();
    assert!(lines.contains(&"cargo run --release -- --demo"));
    assert!(lines.contains(&"cargo test --workspace"));
    let checks = read(".ci/run");
    assert!(
        checks
            .lines()
            .any(|line| line.starts_with("cargo test --workspace "))
    );
}

#[test]
fn the_readme_lists_every_setting_with_its_default() {
    let readme = read("README.md");
    for setting in leat::config::Config::command().get_arguments() {
        let flag = format!("`--{}", setting.get_long().expect("a long flag"));
        let row = readme.lines().find(|line| {
            line.starts_with('|')
                && (line.contains(&format!("{flag}`")) || line.contains(&format!("{flag} ")))
        });
        let row = row.unwrap_or_else(|| panic!("the README has no row for {flag}`"));
        if let Some(variable) = setting.get_env() {
            let variable = format!("`{}`", variable.to_string_lossy());
            assert!(row.contains(&variable), "{row}");
        }
        for default in setting.get_default_values() {
            let default = format!("`{}`", default.to_string_lossy());
            assert!(row.contains(&default), "{row}");
        }
    }
}

#[test]
fn every_template_and_asset_is_used() {
    let code: String = files()
        .iter()
        .filter(|file| file.starts_with("src/") || file.starts_with("templates/"))
        .filter(|file| file.ends_with(".rs") || file.ends_with(".html") || file.ends_with(".css"))
        .map(|file| read(file))
        .collect();
    for file in files() {
        let Some(name) = file.strip_prefix("templates/") else {
            continue;
        };
        let used = if name.ends_with(".html") {
            code.contains(&format!("\"{name}\""))
        } else {
            // The notices beside the vendored reader of the API are there to be read.
            // The worker is served at the root.
            name.starts_with("assets/api-reader/")
                || code.contains(&format!("/{name}"))
                || name == "assets/service-worker.js"
        };
        assert!(used, "nothing uses {file}");
    }
}

#[test]
fn no_file_names_a_place_on_one_machine() {
    let places = ["home", "root", "Users", "work"].map(|folder| format!("/{folder}/"));
    for file in files() {
        // Vendored, and binary files.
        if file.starts_with("templates/assets/api-reader/") {
            continue;
        }
        let Ok(text) = fs::read_to_string(Path::new(ROOT).join(&file)) else {
            continue;
        };
        for place in &places {
            for at in text.match_indices(place.as_str()).map(|(at, _)| at) {
                let before = text[..at].chars().next_back().unwrap_or(' ');
                // `…/home/…` inside a longer address is no place of this kind.
                let absolute = before.is_whitespace() || "\"'`=(:".contains(before);
                assert!(!absolute, "{file} names a place under {place}");
            }
        }
        if file.ends_with("package-lock.json") {
            assert!(!text.contains("\"resolved\""), "{file} names a registry");
        }
    }
}

#[test]
fn everything_leat_is_built_from_may_be_passed_on() {
    let metadata = metadata();
    let shipped = shipped(&metadata);
    assert!(shipped.len() > 100, "{} packages", shipped.len());
    let mut tests_only = 0;
    for package in metadata["packages"].as_array().expect("packages") {
        let name = &package["name"];
        let licence = package["license"].as_str().unwrap_or_default();
        let ships = shipped.contains(package["id"].as_str().expect("an id"));
        tests_only += usize::from(!ships);
        assert!(
            permitted(licence, !ships),
            "{name} is under “{licence}”, which is not known to be permissive"
        );
    }
    assert!(tests_only > 0);
}

#[test]
fn a_licence_that_is_no_choice_or_is_not_known_is_refused() {
    for good in [
        "MIT",
        "GPL-3.0 OR MIT",
        "(MIT OR Apache-2.0) AND Unicode-3.0",
        "Unlicense/MIT",
    ] {
        assert!(permitted(good, false), "{good}");
    }
    for bad in [
        "",
        "GPL-3.0",
        "MIT AND GPL-3.0",
        "(GPL-3.0 OR AGPL-3.0) AND MIT",
        "MPL-2.0",
    ] {
        assert!(!permitted(bad, false), "{bad}");
    }
    assert!(permitted("MPL-2.0", true));
}

/// Whether a licence expression lets us choose permissive ones: one of each `OR`, all of
/// each `AND`. Exceptions to a licence (`WITH`) only allow more.
fn permitted(expression: &str, in_tests: bool) -> bool {
    expression.split(" AND ").all(|choices| {
        choices
            .trim_matches(['(', ')'])
            .split(" OR ")
            .flat_map(|choice| choice.split('/'))
            .filter_map(|choice| choice.split_whitespace().next())
            .any(|licence| PERMISSIVE.contains(&licence) || (in_tests && licence == "MPL-2.0"))
    })
}

/// The packages that end up in the program or run while it is built.
fn shipped(metadata: &Value) -> BTreeSet<&str> {
    let nodes = metadata["resolve"]["nodes"].as_array().expect("nodes");
    let by_id: HashMap<&str, &Value> = nodes
        .iter()
        .map(|node| (node["id"].as_str().expect("an id"), node))
        .collect();
    let mut open = vec![metadata["resolve"]["root"].as_str().expect("a root")];
    let mut found = BTreeSet::new();
    while let Some(id) = open.pop() {
        if !found.insert(id) {
            continue;
        }
        for dependency in by_id[id]["deps"].as_array().expect("deps") {
            let kinds = dependency["dep_kinds"].as_array().expect("kinds");
            if kinds.iter().any(|kind| kind["kind"] != "dev") {
                open.push(dependency["pkg"].as_str().expect("a package"));
            }
        }
    }
    found
}

/// What cargo knows of the packages built on this platform.
fn metadata() -> Value {
    let version = run(Command::new("rustc").arg("-vV"));
    let host = version.lines().find_map(|line| line.strip_prefix("host: "));
    let host = host.expect("rustc names its host");
    let arguments = [
        "metadata",
        "--format-version=1",
        "--locked",
        "--filter-platform",
        host,
    ];
    let answer = run(Command::new(env!("CARGO")).args(arguments));
    serde_json::from_str(&answer).expect("JSON")
}

/// Every file of the tree: what git holds, or, where it is no clone, what lies there.
fn files() -> Vec<String> {
    let git = Command::new("git")
        .args(["-c", "safe.directory=*", "ls-files"])
        .current_dir(ROOT)
        .output();
    let mut files: Vec<String> = match git {
        Ok(list) if list.status.success() => String::from_utf8_lossy(&list.stdout)
            .lines()
            .map(str::to_owned)
            .collect(),
        _ => {
            let mut found = Vec::new();
            walk("", &mut found);
            found
        }
    };
    files.retain(|file| Path::new(ROOT).join(file).is_file());
    files.sort();
    assert!(files.len() > 100, "{} files", files.len());
    files
}

fn walk(folder: &str, found: &mut Vec<String>) {
    for entry in fs::read_dir(Path::new(ROOT).join(folder)).expect("a folder") {
        let entry = entry.expect("an entry");
        let name = entry.file_name().to_string_lossy().into_owned();
        let made = ["target", "node_modules", ".git"].contains(&name.as_str());
        if made || name.contains(".sqlite") {
            continue;
        }
        let path = format!("{folder}{name}");
        if entry.file_type().expect("a type").is_dir() {
            walk(&format!("{path}/"), found);
        } else {
            found.push(path);
        }
    }
}

fn run(command: &mut Command) -> String {
    let output = command
        .current_dir(ROOT)
        .output()
        .expect("a program that starts");
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
    String::from_utf8(output.stdout).expect("UTF-8")
}

fn read(file: &str) -> String {
    fs::read_to_string(Path::new(ROOT).join(file)).unwrap_or_else(|error| panic!("{file}: {error}"))
}
