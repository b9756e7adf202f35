//! Medians, the table and the target lines of every benchmark.

/// The median; of an even number of values the mean of the middle two. NaN of none.
pub(crate) fn median(values: &[f64]) -> f64 {
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    let n = sorted.len();
    if n == 0 {
        f64::NAN
    } else {
        f64::midpoint(sorted[(n - 1) / 2], sorted[n / 2])
    }
}

/// Prints rows under a head, columns right-aligned.
pub(crate) fn print_table(head: &[&str], rows: &[Vec<String>]) {
    let width = |column: usize| {
        let cells = rows.iter().map(|r| r[column].chars().count());
        cells.max().unwrap_or(0).max(head[column].chars().count())
    };
    let widths: Vec<usize> = (0..head.len()).map(width).collect();
    let print = |cells: &[String]| {
        let cells = cells.iter().zip(&widths).map(|(c, w)| format!("{c:>w$}"));
        println!("{}", cells.collect::<Vec<_>>().join("  "));
    };
    print(&head.iter().map(ToString::to_string).collect::<Vec<_>>());
    rows.iter().for_each(|row| print(row));
}

/// Prints whether a measured value reaches the wanted one; nothing is asserted.
pub(crate) fn print_target(name: &str, measured: f64, wanted: f64) {
    let verdict = if measured >= wanted { "holds" } else { "short" };
    println!("target {name} {measured:.3} {wanted} {verdict}");
}
