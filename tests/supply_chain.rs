//! The dependency tree against `supply-chain.toml`: licences, sources, versions; and each direct dependency has its reason in
//! DEVELOPERS.md. Asks cargo, offline.

use serde_json::Value;
use std::collections::{BTreeMap, BTreeSet};
use std::process::Command;

/// Packages that are built on this machine, with all features if their sources are here.
fn packages() -> Vec<Value> {
    let version = Command::new(env!("CARGO")).arg("-vV").output().expect("cargo runs");
    let version = String::from_utf8(version.stdout).expect("text");
    let host = version.lines().find_map(|line| line.strip_prefix("host: ")).expect("a host");
    let ask = |features: &[&str]| {
        Command::new(env!("CARGO"))
            .current_dir(env!("CARGO_MANIFEST_DIR"))
            .args(["metadata", "--format-version", "1", "--offline", "--filter-platform", host])
            .args(features)
            .output()
            .ok()
            .filter(|output| output.status.success())
    };
    let told = ask(&["--all-features"]).or_else(|| ask(&[])).expect("cargo metadata");
    let whole: Value = serde_json::from_slice(&told.stdout).expect("JSON");
    let built: BTreeSet<&str> =
        whole["resolve"]["nodes"].as_array().expect("nodes").iter().filter_map(|node| node["id"].as_str()).collect();
    let all = whole["packages"].as_array().expect("packages");
    all.iter().filter(|package| built.contains(package["id"].as_str().unwrap_or_default())).cloned().collect()
}

fn policy() -> toml::Table {
    include_str!("../supply-chain.toml").parse().expect("a policy")
}

fn name(package: &Value) -> &str {
    package["name"].as_str().expect("a name")
}

/// True if every part of an expression such as `(MIT OR Apache-2.0) AND Unicode-3.0` has an alternative that is allowed.
fn allowed(expression: &str, licences: &BTreeSet<&str>) -> bool {
    let parts = expression.split(" AND ").map(|part| part.trim_matches(['(', ')', ' ']));
    parts.into_iter().all(|part| part.replace('/', " OR ").split(" OR ").any(|one| licences.contains(one.trim())))
}

#[test]
fn every_package_has_a_licence_that_is_allowed() {
    let policy = policy();
    let licences: BTreeSet<&str> =
        policy["licences"].as_array().expect("a list").iter().filter_map(|l| l.as_str()).collect();
    let single = policy["packages"].as_table().expect("a table");
    let packages = packages();
    assert!(packages.len() > 80, "{}", packages.len());
    for package in packages {
        let licence = package["license"].as_str().unwrap_or_default();
        let named = single.iter().any(|(pattern, its)| {
            let fits =
                pattern.strip_suffix('*').map_or(pattern == name(&package), |start| name(&package).starts_with(start));
            fits && its.as_str() == Some(licence)
        });
        assert!(named || allowed(licence, &licences), "{}: {licence}", name(&package));
    }
}

#[test]
fn an_expression_is_allowed_by_one_alternative_of_each_part() {
    let licences = BTreeSet::from(["MIT", "Unicode-3.0"]);
    for (expression, right) in [
        ("MIT", true),
        ("GPL-3.0-only OR MIT", true),
        ("Apache-2.0/MIT", true),
        ("(MIT OR Apache-2.0) AND Unicode-3.0", true),
        ("(GPL-3.0-only OR Apache-2.0) AND Unicode-3.0", false),
        ("MIT AND GPL-3.0-only", false),
        ("", false),
    ] {
        assert_eq!(allowed(expression, &licences), right, "{expression}");
    }
}

#[test]
fn everything_comes_from_the_registry_and_in_one_version() {
    let policy = policy();
    let several = policy["several_versions"].as_table().expect("a table");
    let mut versions: BTreeMap<String, BTreeSet<String>> = BTreeMap::new();
    for package in packages() {
        let source = package["source"].as_str();
        let ours = name(&package) == env!("CARGO_PKG_NAME");
        assert!(ours || source.is_some_and(|source| source.starts_with("registry+")), "{}: {source:?}", name(&package));
        let version = package["version"].as_str().expect("a version").to_owned();
        versions.entry(name(&package).to_owned()).or_default().insert(version);
    }
    for (name, versions) in versions {
        assert!(versions.len() == 1 || several.contains_key(&name), "{name} in {versions:?}");
    }
}

#[test]
fn every_direct_dependency_has_its_reason() {
    let page = include_str!("../DEVELOPERS.md");
    let manifest: toml::Table = include_str!("../Cargo.toml").parse().expect("a manifest");
    let mut tables = vec![&manifest["dependencies"], &manifest["dev-dependencies"]];
    tables.extend(manifest["target"].as_table().expect("targets").values().map(|target| &target["dependencies"]));
    for name in tables.into_iter().flat_map(|table| table.as_table().expect("a table").keys()) {
        assert!(page.contains(&format!("| `{name}` |")), "{name} has no line in the table of DEVELOPERS.md");
    }
}
