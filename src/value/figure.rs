/// A plot as data: what is drawn, where in the units of its axes, and what its words say. How it looks is the matter of
/// whoever draws it.
#[derive(Clone, Debug, PartialEq)]
pub struct Figure {
    /// What it shows: the expression, or the name that somebody gave it.
    pub title: String,
    /// What kind of thing that is, over which times, and what the band means.
    pub subtitle: String,
    /// The same in words with the main numbers, for those who cannot see it.
    pub description: String,
    /// What is missing or was left out, one line each.
    pub notes: Vec<String>,
    /// Small print: the fingerprint, and what it was refreshed by.
    pub footer: String,
    /// The panels, from top to bottom.
    pub panels: Vec<Panel>,
}

/// One pair of axes with what is drawn between them.
#[derive(Clone, Debug, PartialEq)]
pub struct Panel {
    /// The axis along the bottom.
    pub horizontal: PlotAxis,
    /// The axis at the side.
    pub vertical: PlotAxis,
    /// What is drawn, the hindmost first.
    pub marks: Vec<Mark>,
}

/// One axis of a panel. Times are decimal years CE, whatever the era of their labels, so that older is always at the low
/// end.
#[derive(Clone, Debug, PartialEq)]
pub struct PlotAxis {
    /// What it measures, with its unit or era: `forcing (W m⁻²)`, `age (ka before 1950)`.
    pub title: String,
    /// Where it begins.
    pub low: f64,
    /// Where it ends; greater than `low`.
    pub high: f64,
    /// Whether it runs the other way than usual, with `high` at the left or at the bottom.
    pub turned: bool,
    /// Where it is labelled, ascending.
    pub ticks: Vec<Tick>,
}

/// A labelled place on an axis.
#[derive(Clone, Debug, PartialEq)]
pub struct Tick {
    /// The place.
    pub at: f64,
    /// What stands there.
    pub label: String,
}

/// One thing that is drawn in a panel.
#[derive(Clone, Debug, PartialEq)]
pub enum Mark {
    /// A range around a line.
    Band(Band),
    /// A line.
    Line(Line),
}

/// A line, broken where there are gaps.
#[derive(Clone, Debug, PartialEq)]
pub struct Line {
    /// The stretches between gaps: places `[along, up]` in the units of the axes, all of them finite.
    pub runs: Vec<Vec<[f64; 2]>>,
    /// In what it is drawn.
    pub ink: Ink,
    /// The label at its end.
    pub label: Option<String>,
    /// Whether each place has a dot, where they are few and the line between them is only drawn to guide the eye.
    pub dots: bool,
}

/// A range, broken where there are gaps.
#[derive(Clone, Debug, PartialEq)]
pub struct Band {
    /// The stretches between gaps: places `[along, low, high]`, all of them finite.
    pub runs: Vec<Vec<[f64; 3]>>,
    /// In what it is drawn.
    pub ink: Ink,
}

/// The colour and style of a mark, by its part in the figure.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ink {
    /// The colour of the text: what the figure is about, such as a sum.
    Foremost,
    /// One of several, by number: each has a colour and a line style of its own.
    Numbered(usize),
    /// What is there for completeness.
    Faint,
}

impl Line {
    /// The last place that is drawn.
    pub fn end(&self) -> Option<[f64; 2]> {
        self.runs.last()?.last().copied()
    }
}
