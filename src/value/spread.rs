/// What the members of an uncertain value say, column by column; the 5–95 % range.
#[derive(Clone, Debug, PartialEq)]
pub struct Spread {
    /// The median.
    pub median: Vec<f64>,
    /// The 5 % quantile.
    pub low: Vec<f64>,
    /// The 95 % quantile.
    pub high: Vec<f64>,
    /// How many members there are.
    pub members: u64,
}
