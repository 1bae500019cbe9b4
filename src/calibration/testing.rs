//! Reference files for this room's tests.

pub(super) fn reference_text(name: &str) -> String {
    let path = format!("{}/tests/reference/{name}", env!("CARGO_MANIFEST_DIR"));
    std::fs::read_to_string(&path).unwrap_or_else(|error| panic!("{path}: {error}"))
}

/// Rows of numbers of a CSV file (comments first, then one header row).
pub(super) fn reference_rows(name: &str) -> Vec<Vec<f64>> {
    let numbers = |line: &str| line.split(',').map(|field| field.trim().parse().unwrap()).collect();
    reference_text(name).lines().filter(|line| !line.starts_with('#')).skip(1).map(numbers).collect()
}

pub(super) fn reference_toml(name: &str) -> toml::Table {
    reference_text(name).parse().unwrap()
}

pub(super) fn number(table: &toml::Table, key: &str) -> f64 {
    table[key].as_float().unwrap_or_else(|| table[key].as_integer().unwrap() as f64)
}

pub(super) fn table_numbers(table: &toml::Table, key: &str) -> Vec<f64> {
    table[key].as_array().unwrap().iter().map(|value| value.as_float().unwrap()).collect()
}
