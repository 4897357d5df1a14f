//! How much of a record each driver explains, by regression.
//!
//! Longer than most files: the entry, what it refuses beforehand, and the steps from drivers to contributions are read
//! together.

use std::sync::Arc;

use super::algebra::unknown_component;
use super::call::{Call, Path, Stop, wrong_kind};
use super::citations::{AITKEN_1936, DURBIN_WATSON_1950, PRAIS_WINSTEN_1954};
use super::entry::{Body, Entry, Fails, ReadsClock, Room, Shows};
use super::onto::{bring, content_total, counted, total};
use super::response::respond;
use crate::base::Fault;
use crate::language::{Choice, Parameter, Signature};
use crate::science::{reduce, regression, student};
use crate::value::{
    Attribution, Axis, Bundle, CAUTION, Coefficient, Content, FitStatistics, Model, Series, Shape, TimeSpan,
    Unit, Value,
};

static ATTRIBUTE: Entry = Entry {
    name: "attribute",
    room: Room::Inference,
    summary: "How much of a record each driver explains, by regression, with intervals and diagnostics.",
    signature: Signature {
        parameters: &[
            Parameter::required(
                "record",
                &["series"],
                "the record; it is never refined, and n counts its own values; `within` takes a part of it",
            ),
            Parameter::required(
                "to",
                &["bundle", "series", "list"],
                "the drivers: a bundle, whose components are regressors, or a list, whose items may differ in unit where no response is asked for",
            ),
            Parameter::required("response", &["model"], "the model that every driver goes through first")
                .or_choices(&[Choice::plain("none", "the drivers as they are")])
                .by_default("none"),
            Parameter::optional(
                "beside",
                &["series", "list"],
                "regressors that are no forcing and go through no response, such as an ocean index",
            ),
            Parameter::optional(
                "groups",
                &["list"],
                "what counts as one regressor: `[sun + sulfate, gases]`",
            )
            .as_groups(),
            Parameter::choice(
                "method",
                &[
                    Choice::plain("ordinary_least_squares", "residuals independent")
                        .also(&["least_squares", "lstsq"]),
                    Choice::plain("generalised_least_squares", "residuals correlated as `noise:` says"),
                ],
                "ordinary_least_squares",
                "the regression",
            ),
            Parameter::optional(
                "noise",
                &[],
                "what the residuals are like; must be said for generalised least squares",
            )
            .or_choices(&[
                Choice::plain("white", "independent").also(&["iid", "uncorrelated", "independent"]),
                Choice {
                    name: "ar1",
                    meaning: "a first-order autoregression with known persistence",
                    search: &["red", "red_noise", "autoregressive", "markov"],
                    parameters: &[
                        Parameter::required(
                            "coefficient",
                            &["quantity"],
                            "the correlation of values one `per` apart",
                        )
                        .in_unit("1"),
                        Parameter::required(
                            "per",
                            &["duration"],
                            "the time to which the coefficient belongs",
                        )
                        .in_unit("yr"),
                    ],
                },
            ]),
            Parameter::optional(
                "change",
                &["span"],
                "the later window of the change that is to be explained",
            ),
            Parameter::optional("from", &["span"], "the earlier window of that change"),
        ],
    },
    result: "an attribution: coefficients in the record's unit over the driver's, 5–95 % intervals by Student's t, contributions",
    equation: Some(
        r"y = \beta_0 + \sum_i \beta_i x_i + u,\quad \hat\beta = (X^\top V^{-1} X)^{-1} X^\top V^{-1} y,\quad V_{st} = \rho^{|s-t|}",
    ),
    gaps: "Times at which the record or any driver has a gap are left out, and counted.",
    shows: &[
        Shows {
            program: "x = series([0, 1, 2, 3, 4] W/m2, along: 1850..1854 CE by 1 yr)\ny = series([0.1, 0.4, 1.1, 1.4, 2.1] degC, along: 1850..1854 CE by 1 yr)\nattribute(y, to: [x])",
            gives: "x 0.500 degC*m2/W [0.406, 0.594]; n = 5, R2 = 0.981",
        },
        Shows {
            program: "x = series([0, 1, 2, 3, 4] W/m2, along: 1850..1854 CE by 1 yr)\ny = series([0.1, 0.4, 1.1, 1.4, 2.1] degC, along: 1850..1854 CE by 1 yr)\nattribute(y, to: [x], method: generalised_least_squares, noise: ar1(0.5, per: 1 yr))",
            gives: "x 0.50 degC*m2/W [0.34, 0.66]; n = 5, R2 = 0.980",
        },
    ],
    fails: &[
        Fails {
            program: "x = series([0, 1, 2] W/m2, along: 1850..1852 CE by 1 yr)\ny = series([0, 1, 3] degC, along: 1850..1852 CE by 1 yr)\nattribute(y, to: [x, early: x])",
            code: "syntax",
            says: "found `:`",
        },
        Fails {
            program: "x = series([1, 1, 1, 1] W/m2, along: 1850..1853 CE by 1 yr)\ny = series([0, 1, 3, 2] degC, along: 1850..1853 CE by 1 yr)\nattribute(y, to: [x])",
            code: "constant-driver",
            says: "does not change",
        },
        Fails {
            program: "x = series([0, 1, 2] W/m2, along: 1850..1852 CE by 1 yr)\ny = series([0, 1, 3] degC, along: 1850..1852 CE by 1 yr)\nattribute(y, to: [x], method: generalised_least_squares)",
            code: "missing-argument",
            says: "noise",
        },
    ],
    citations: &[&AITKEN_1936, &PRAIS_WINSTEN_1954, &DURBIN_WATSON_1950],
    search: &[
        "regression",
        "fit",
        "detection",
        "scaling factor",
        "explain",
        "least squares",
        "multiple linear",
    ],
    reads_clock: ReadsClock::Always,
    labels: true,
    shape: check,
    body: Body::AcrossMembers(attribute),
    ..Entry::PLAIN
};

pub(super) const FAMILY: &[&Entry] = &[&ATTRIBUTE];

/// Everything that can be refused before a number is computed.
fn check(call: &Call<'_>) -> Result<Shape, Stop> {
    let method = call.choice("method").map_or("", |(word, _)| word);
    let noise = call.choice("noise").map(|(word, _)| word);
    match (method, noise) {
        ("generalised_least_squares", None) => {
            return Err(Fault::new("missing-argument", "generalised least squares needs `noise:`")
                .help("say what the residuals are like: `noise: ar1(0.55, per: 1 yr)` or `noise: white`")
                .into());
        }
        ("ordinary_least_squares", Some("ar1")) => {
            return Err(Fault::new(
                "wrong-argument",
                "ordinary least squares takes the residuals to be independent",
            )
            .blame("noise")
            .help("for correlated residuals add `method: generalised_least_squares`")
            .into());
        }
        _ => {}
    }
    if call.slot("change").is_some() != call.slot("from").is_some() {
        return Err(Fault::new("missing-argument", "a change needs both its windows, `change:` and `from:`")
            .help("for instance `change: 2010..2019 CE, from: 1850..1900 CE`")
            .into());
    }
    if call.choice("response").is_none() {
        drivers_are_forcings(call)?;
    }
    let Shape::List(items) = call.shape("to")? else { return Ok(Shape::Attribution) };
    for item in &items {
        if !matches!(item, Shape::Series(_) | Shape::Bundle(_)) {
            return Err(Fault::new(
                "wrong-argument",
                format!("{} stands in the list of drivers", item.describe()),
            )
            .blame("to")
            .help("the list holds series and bundles")
            .into());
        }
    }
    if items.is_empty() {
        return Err(Fault::new("wrong-argument", "the list of drivers is empty").blame("to").into());
    }
    Ok(Shape::Attribution)
}

fn drivers_are_forcings(call: &Call<'_>) -> Result<(), Stop> {
    let flux = unit("W/m2")?;
    let shapes = match call.shape("to")? {
        Shape::List(items) => items,
        other => vec![other],
    };
    for measure in shapes.iter().filter_map(Shape::measure) {
        measure.unit.factor_to(&flux).map_err(|fault| {
            fault
                .blame("to")
                .help("what goes through a response is a forcing in W/m2; other regressors go into `beside:`")
        })?;
    }
    Ok(())
}

fn unit(text: &str) -> Result<Unit, Fault> {
    Unit::parse(text).map_err(|_| Fault::new("internal", "a unit of the table is missing"))
}

fn attribute(call: &Call<'_>) -> Result<Value, Stop> {
    let record = call.value("record")?;
    let Value::Series(record) = record.as_ref() else { return Err(wrong_kind("record", &record).into()) };
    let regressors = regressors(call)?;
    let axis = record_axis(call, record)?;
    let observed = bring(call.context, record, &call.label("record"), &axis)?;
    let mut columns = Vec::with_capacity(regressors.len());
    for (label, series) in &regressors {
        columns.push(bring(call.context, series, label, &axis)?.member(0).to_vec());
    }
    let cancellation = call.context.cancellation();
    cancellation.check()?;
    let complete: Vec<usize> = (0..axis.len())
        .filter(|row| value_at(observed.member(0), *row).is_finite())
        .filter(|row| columns.iter().all(|column| value_at(column, *row).is_finite()))
        .collect();
    note_left_out(call, observed.member(0), complete.len());
    let keep = |values: &[f64]| complete.iter().map(|row| value_at(values, *row)).collect::<Vec<f64>>();
    let fitted_axis = Arc::new(axis_of(&axis, &complete));
    let response = keep(observed.member(0));
    let columns: Vec<Vec<f64>> = columns.iter().map(|column| keep(column)).collect();
    let labels: Vec<Arc<str>> = regressors.iter().map(|(label, _)| label.clone()).collect();

    let slices: Vec<&[f64]> = columns.iter().map(Vec::as_slice).collect();
    let blamed = |error| regression_fault(&error, &labels);
    cancellation.check()?;
    let design = regression::Design::new(&slices).map_err(blamed)?;
    cancellation.check()?;
    let (fit, noise, rho) = fit(call, &fitted_axis, &response, &design, &labels)?;

    let intervals = fit.intervals(0.9).map_err(|error| regression_fault(&error, &labels))?;
    let record_unit = record.measure.unit.clone();
    let coefficient = |index: usize, label: Arc<str>, unit: Unit, regressor: Vec<f64>| {
        let (low, high) = intervals.get(index).copied().unwrap_or((f64::NAN, f64::NAN));
        Coefficient {
            label,
            unit,
            value: value_at(&fit.coefficients, index),
            standard_error: value_at(&fit.standard_errors, index),
            t: value_at(&fit.t, index),
            low,
            high,
            variance_inflation: index
                .checked_sub(1)
                .and_then(|at| fit.variance_inflation_factors.get(at).copied()),
            regressor,
            contribution: None,
        }
    };
    let intercept = coefficient(0, Arc::from("intercept"), record_unit.clone(), vec![1.0; response.len()]);
    let drivers = regressors
        .iter()
        .zip(columns)
        .enumerate()
        .map(|(index, ((label, series), column))| {
            let unit = record_unit.times(&series.measure.unit, -1);
            coefficient(index + 1, label.clone(), unit, column)
        })
        .collect();
    let fitted =
        response.iter().zip(&fit.residuals).map(|(observed, residual)| observed - residual).collect();
    let mut attribution = Attribution {
        method: call.choice("method").map_or("", |(word, _)| word).replace('_', " "),
        noise,
        unit: record_unit,
        intercept,
        drivers,
        covariance: fit.covariance.concat(),
        t_quantile: student::quantile(fit.degrees_of_freedom as f64, 0.95),
        statistics: FitStatistics {
            count: response.len(),
            r_squared: fit.r_squared_original,
            durbin_watson: fit.durbin_watson,
            rho,
            residual_autocorrelation: fit.residual_autocorrelation,
            log_likelihood: fit.log_likelihood,
            akaike: fit.aic,
            condition_number: fit.condition_number,
        },
        axis: fitted_axis,
        observed: response,
        fitted,
        windows: None,
        observed_change: None,
        explained: None,
    };
    if let (Some(later), Some(earlier)) = (call.span("change")?, call.span("from")?) {
        contribute(&mut attribution, later, earlier)?;
    }
    if call.slot("to").is_some_and(|slot| call.context.is_uncertain(slot)) {
        call.context.note(
            "the intervals are the regression's own, on the drivers' nominal values: the drivers' spread is not in them"
                .to_owned(),
        );
    }
    note_noise(call, &attribution);
    if attribution.windows.is_none() {
        call.context.note("contributions to a change need its two windows: `change:` and `from:`".to_owned());
    }
    call.context.note(CAUTION.to_owned());
    Ok(Value::Attribution(Arc::new(attribution)))
}

/// Say where the residuals are not what the method takes them to be.
fn note_noise(call: &Call<'_>, attribution: &Attribution) {
    let statistics = &attribution.statistics;
    let found = statistics.residual_autocorrelation;
    // Twice the standard error of a correlation of independent values.
    let tolerance = 2.0 / (statistics.count as f64).sqrt();
    match statistics.rho {
        None if found > tolerance => call.context.note(format!(
            "the residuals correlate at {found:.2} from value to value, so these intervals are too narrow: generalised least squares takes that into account"
        )),
        Some(rho) if found - rho > tolerance => call.context.note(format!(
            "the residuals correlate at {found:.2} from value to value, and `noise:` says {rho:.2}: these intervals are too narrow"
        )),
        _ => {}
    }
}

fn value_at(values: &[f64], index: usize) -> f64 {
    values.get(index).copied().unwrap_or(f64::NAN)
}

fn note_left_out(call: &Call<'_>, observed: &[f64], used: usize) {
    let present = observed.iter().filter(|value| value.is_finite()).count();
    if used < present && call.context.path() == Path::Nominal {
        call.context.note(format!(
            "{} of the record inside the clock's span left out, where a driver has a gap",
            counted(present - used, "values")
        ));
    }
}

/// The record's own axis, inside the clock's span where there is one.
fn record_axis(call: &Call<'_>, record: &Series) -> Result<Arc<Axis>, Stop> {
    let Some((start, end)) = call.context.clock().and_then(|clock| clock.axis.bounds()) else {
        return Ok(record.axis.clone());
    };
    let span = TimeSpan { start, end, era: record.axis.era, last: end };
    let inside = record.axis.inside(&span);
    if inside.is_empty() {
        return Err(Fault::new(
            "no-overlap",
            format!("`{}` has no value inside the clock's span", call.label("record")),
        )
        .detail(format!("record: {}", record.axis.describe()))
        .blame("record")
        .into());
    }
    if inside.len() == record.axis.len() {
        return Ok(record.axis.clone());
    }
    Ok(Arc::new(record.axis.part(inside)))
}

fn axis_of(axis: &Axis, rows: &[usize]) -> Axis {
    let pick = |times: &[f64]| rows.iter().map(|row| value_at(times, *row)).collect();
    match axis.kind {
        crate::value::AxisKind::Steps => Axis::steps(pick(axis.starts()), pick(axis.ends()), axis.era),
        crate::value::AxisKind::Instants => Axis::instants(pick(axis.starts()), axis.era),
    }
}

type Labelled = (Arc<str>, Series);

/// The regressors with their labels: the drivers, through the response if one is asked for, and those beside.
fn regressors(call: &Call<'_>) -> Result<Vec<Labelled>, Stop> {
    let drivers = grouped(call)?;
    let mut regressors = Vec::with_capacity(drivers.len());
    let model = match call.maybe("response")?.as_deref() {
        Some(Value::Model(model)) => Some(model.clone()),
        _ => None,
    };
    for (label, content) in drivers {
        let series = match &model {
            None => content_total(call.context, &content)?,
            Some(model) => responded(call, &content, &label, model)?,
        };
        regressors.push((label, series));
    }
    if let Some(beside) = call.maybe("beside")? {
        regressors.extend(listed(call, "beside", beside.as_ref())?.into_iter().filter_map(
            |(label, content)| {
                if let Content::Series(series) = content { Some((label, series)) } else { None }
            },
        ));
    }
    for (index, (label, _)) in regressors.iter().enumerate() {
        if regressors.iter().take(index).any(|(other, _)| other == label) {
            return Err(Fault::new("equal-labels", format!("two regressors are called `{label}`"))
                .help("give one of them a name of its own")
                .into());
        }
    }
    Ok(regressors)
}

fn responded(call: &Call<'_>, content: &Content, label: &str, model: &Model) -> Result<Series, Stop> {
    match content {
        Content::Series(series) => respond(call.context, series, label, model, None),
        Content::Bundle(bundle) => {
            let parts = super::onto::each_component(bundle, &mut |series, label| {
                respond(call.context, series, label, model, None)
            })?;
            total(call.context, &parts)
        }
    }
}

/// The drivers before any response: the components of a bundle, the items of a list, or the groups asked for.
fn grouped(call: &Call<'_>) -> Result<Vec<(Arc<str>, Content)>, Stop> {
    let to = call.value("to")?;
    let drivers = listed(call, "to", to.as_ref())?;
    let Some(groups) = call.groups("groups") else { return Ok(drivers) };
    let mut parts: Vec<(Arc<str>, Content)> = Vec::new();
    for (label, content) in drivers {
        named_parts(label, content, &mut parts);
    }
    let labels: Vec<Arc<str>> = parts.iter().map(|(label, _)| label.clone()).collect();
    let mut regressors = Vec::new();
    for group in groups {
        let mut components = Vec::new();
        for label in group {
            let found = parts.iter().find(|(other, _)| other == label);
            let Some((_, content)) = found else {
                return Err(unknown_component(label, &labels).blame("groups").into());
            };
            components.push(crate::value::Component { label: label.clone(), content: content.clone() });
        }
        let label: Vec<&str> = group.iter().map(|label| &**label).collect();
        let content = match components.as_slice() {
            [one] => one.content.clone(),
            _ => Content::Bundle(Bundle { components }),
        };
        regressors.push((Arc::from(label.join(" + ")), content));
    }
    let used: Vec<&Arc<str>> = groups.iter().flatten().collect();
    for (index, label) in used.iter().enumerate() {
        if used.iter().take(index).any(|other| other == label) {
            return Err(Fault::new("argument-twice", format!("`{label}` stands in the groups twice"))
                .blame("groups")
                .into());
        }
    }
    let mut left = Vec::new();
    for (label, content) in listed(call, "to", to.as_ref())? {
        left_out(&label, &content, &used, &mut left);
    }
    if !left.is_empty() {
        call.context.note(format!("in no group, and so left out: {}", left.join(", ")));
    }
    Ok(regressors)
}

/// The drivers that no group names, neither themselves nor the bundle they stand in.
fn left_out(label: &Arc<str>, content: &Content, used: &[&Arc<str>], left: &mut Vec<String>) {
    match content {
        _ if used.contains(&label) => {}
        Content::Series(_) => left.push(label.to_string()),
        Content::Bundle(bundle) => {
            for part in &bundle.components {
                left_out(&part.label, &part.content, used, left);
            }
        }
    }
}

/// A component and, where it is a bundle, those inside it: a group may name either.
fn named_parts(label: Arc<str>, content: Content, parts: &mut Vec<(Arc<str>, Content)>) {
    if let Content::Bundle(bundle) = &content {
        for part in &bundle.components {
            named_parts(part.label.clone(), part.content.clone(), parts);
        }
    }
    parts.push((label, content));
}

/// A bundle's components, a list's items, or one series.
fn listed(call: &Call<'_>, name: &'static str, value: &Value) -> Result<Vec<(Arc<str>, Content)>, Stop> {
    match value {
        Value::Series(series) => Ok(vec![(call.label(name), Content::Series(series.clone()))]),
        Value::Bundle(bundle) => {
            Ok(bundle.components.iter().map(|part| (part.label.clone(), part.content.clone())).collect())
        }
        Value::List(items) => {
            let labels = call.slot(name).map(|slot| call.context.item_labels(slot)).unwrap_or_default();
            items
                .iter()
                .enumerate()
                .map(|(index, item)| {
                    let label = labels
                        .get(index)
                        .cloned()
                        .unwrap_or_else(|| Arc::from(format!("driver {}", index + 1)));
                    match item.as_ref() {
                        Value::Series(series) => Ok((label, Content::Series(series.clone()))),
                        Value::Bundle(bundle) => Ok((label, Content::Bundle(bundle.clone()))),
                        other => Err(wrong_kind(name, other).into()),
                    }
                })
                .collect()
        }
        other => Err(wrong_kind(name, other).into()),
    }
}

/// The fit, the noise in words, and its correlation over one step of the record.
fn fit(
    call: &Call<'_>,
    axis: &Axis,
    response: &[f64],
    design: &regression::Design,
    labels: &[Arc<str>],
) -> Result<(regression::Regression, String, Option<f64>), Stop> {
    let white = |fit| (fit, "white".to_owned(), None);
    match call.choice("noise") {
        Some(("ar1", noise)) => {
            let coefficient = noise.certain("coefficient")?;
            let per_years = noise.certain("per")?;
            if !(coefficient > -1.0 && coefficient < 1.0) || per_years <= 0.0 {
                return Err(Fault::new(
                    "out-of-range",
                    "the coefficient of an ar1 noise lies between -1 and 1, and `per` is above zero",
                )
                .blame("noise")
                .into());
            }
            let middles = axis.middles();
            let first = value_at(&middles, 0);
            let positions: Vec<f64> = middles.iter().map(|time| (time - first) / per_years).collect();
            let fit = regression::generalised_least_squares_ar1_known(
                response,
                design,
                Some(&positions),
                coefficient,
            )
            .map_err(|error| regression_fault(&error, labels))?;
            let step = axis.median_step() / per_years;
            let rho = if coefficient > 0.0 { coefficient.powf(step) } else { coefficient };
            let words = format!("ar1({coefficient}, per: {})", crate::value::duration_words(per_years));
            Ok((fit, words, Some(rho)))
        }
        _ => {
            let fit = regression::ordinary_least_squares(response, design)
                .map_err(|error| regression_fault(&error, labels))?;
            Ok(white(fit))
        }
    }
}

fn regression_fault(error: &regression::RegressionError, labels: &[Arc<str>]) -> Fault {
    use regression::RegressionError;
    let label = |index: usize| labels.get(index).map_or("?", |label| &**label);
    match error {
        RegressionError::TooFewValues { values, coefficients } => Fault::new(
            "too-few-values",
            format!(
                "{} at which the record and all drivers are known, for {coefficients} coefficients",
                counted(*values, "times")
            ),
        )
        .help("take fewer drivers, or a longer stretch of time in which all have values"),
        RegressionError::ConstantColumn(index) => Fault::new(
            "constant-driver",
            format!(
                "`{}` does not change over the record, so nothing can be attributed to it",
                label(*index)
            ),
        )
        .blame("to"),
        RegressionError::CollinearColumns { column, with } => {
            let others: Vec<String> = with.iter().map(|index| format!("`{}`", label(*index))).collect();
            Fault::new(
                "collinear-drivers",
                format!("`{}` cannot be told apart from {}", label(*column), others.join(", ")),
            )
            .blame("to")
            .help("leave one of them out, or put them into one regressor with `groups:`")
        }
        RegressionError::LengthMismatch { .. }
        | RegressionError::NotFinite { .. }
        | RegressionError::Autocorrelation(_)
        | RegressionError::PositionsNotAscending(_)
        | RegressionError::Level(_) => Fault::new("internal", format!("the regression failed: {error:?}")),
    }
}

/// Fill in what each driver contributes to the change of the record between two windows: coefficient times the change
/// of the regressor, with the standard error that follows from the coefficient's.
pub(super) fn contribute(
    attribution: &mut Attribution,
    later: TimeSpan,
    earlier: TimeSpan,
) -> Result<(), Fault> {
    let axis = attribution.axis.clone();
    let mean = |values: &[f64], span: &TimeSpan, parameter: &'static str| {
        let inside = axis.inside(span);
        let whole = ((span.end - span.start) / axis.median_step().max(1e-9)).max(1.0);
        if (inside.len() as f64) < whole * (2.0 / 3.0) - 1e-6 {
            return Err(Fault::new(
                "baseline",
                format!(
                    "the fit has {} in {span}, and two thirds of it are needed",
                    counted(inside.len(), "values")
                ),
            )
            .detail(format!("fit: {}", axis.describe()))
            .blame(parameter));
        }
        Ok(reduce::mean(values.get(inside).unwrap_or(&[])))
    };
    let change = |values: &[f64]| -> Result<f64, Fault> {
        Ok(mean(values, &later, "change")? - mean(values, &earlier, "from")?)
    };
    attribution.observed_change = Some(change(&attribution.observed)?);
    let changes =
        attribution.drivers.iter().map(|driver| change(&driver.regressor)).collect::<Result<Vec<_>, _>>()?;
    // All together: a sum of correlated estimates, so that its error needs their covariance.
    let size = changes.len() + 1;
    let covariance =
        |row: usize, column: usize| value_at(&attribution.covariance, (row + 1) * size + column + 1);
    let mut variance = 0.0;
    for (row, left) in changes.iter().enumerate() {
        for (column, right) in changes.iter().enumerate() {
            variance += left * right * covariance(row, column);
        }
    }
    let explained =
        attribution.drivers.iter().zip(&changes).map(|(driver, change)| driver.value * change).sum();
    attribution.explained = Some((explained, variance.max(0.0).sqrt()));
    for (driver, change) in attribution.drivers.iter_mut().zip(changes) {
        driver.contribution = Some((driver.value * change, (driver.standard_error * change).abs()));
    }
    attribution.windows = Some((later, earlier));
    Ok(())
}
