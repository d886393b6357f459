//! Verdicts as a table, and where they agree.

use super::result::{Agreement, Retention};
use super::verdict::Verdict;
use crate::components::Scaling;
use crate::exhibit::{Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, stacked, stored};

/// The rules that apply with what they keep, the numbers they agree on, and the rules that do not
/// apply with the reason.
impl Exhibit for Retention {
    fn exhibit(&self) -> Bundle {
        let (apply, silent): (Vec<&Verdict>, Vec<&Verdict>) =
            self.verdicts().iter().partition(|verdict| verdict.n_components().is_some());
        let verdicts = verdicts(self, &apply);
        let agreement = agreement(self);
        let mut tables = vec![&verdicts, &agreement];
        let silent_table = (!silent.is_empty()).then(|| without_answer(&silent));
        tables.extend(silent_table.as_ref());
        stacked(&tables)
    }
}

fn verdicts(of: &Retention, apply: &[&Verdict]) -> Table {
    let options = of.options();
    let comparisons = || apply.iter().filter_map(|verdict| verdict.comparison());
    let decided = || comparisons().map(|comparison| comparison.decided_by());
    let mut table = Table::new(match of.span() {
        Some(span) if span.least == span.most => format!(
            "How many components to keep: all {} that apply say {}",
            counted(of.n_applying(), "rule"),
            span.least
        ),
        Some(span) => format!(
            "How many components to keep: from {} to {}, by {} that apply",
            span.least,
            span.most,
            counted(of.n_applying(), "rule")
        ),
        None => "How many components to keep: no rule applies".to_owned(),
    })
    .column(TableColumn::texts("rule", apply.iter().map(|v| v.rule().name())).as_row_heads())
    .column(TableColumn::counts("keeps", comparisons().map(|c| c.n_components())))
    .column(TableColumn::texts("by", comparisons().map(|c| c.what())))
    .column(TableColumn::texts("last kept", decided().map(|(kept, _)| kept)))
    .column(TableColumn::texts("one more", decided().map(|(_, more)| more)))
    .column(TableColumn::texts("source", apply.iter().map(|v| v.rule().authors())))
    .note(
        "Last kept: what speaks for the last component that the rule keeps; one more: what speaks \
         against the next. Rules that compare place by place count until the first component that \
         fails, W until the last that passes. Values to 3 significant digits.",
    )
    .note(format!(
        "{} and {} {}; divisor n − 1.",
        counted(of.n_rows(), "row"),
        counted(of.n_variables(), "variable"),
        match of.scaling() {
            Scaling::Correlation => "brought to unit variance (correlation)",
            Scaling::Covariance => "in their own units (covariance)",
        }
    ));
    if let Some(n_computed) = of.n_computed_before() {
        table = table.note(format!(
            "The analysis holds its first {} only; all were computed for this table.",
            counted(n_computed, "component")
        ));
    }
    table = table.note(format!(
        "Share to reach {}; level of each test {}, not of the sequence; percentile {} of noise; {} \
         each time something is drawn, seed {}.",
        NumberFormat::Percent.format(options.chosen_share()),
        stored(options.chosen_level(), 4),
        stored(options.chosen_percentile(), 4),
        counted(options.n_replicates(), "table"),
        of.seed()
    ));
    if let Some(bands) = of.variance_bands() {
        let coverage = NumberFormat::Percent.format(bands.coverage());
        table = table.note(format!("Bootstrap: percentile intervals that cover {coverage}."));
    }
    let remarks = apply.iter().filter_map(|verdict| {
        let remark = verdict.comparison()?.remark()?;
        Some((verdict.rule().name(), remark))
    });
    for (remark, names) in gathered(remarks) {
        table = table.note(format!("{}: {remark}", names.join("; ")));
    }
    table.note(
        "Predicting rows that were left out from their own scores is not among the rules: the \
         scores have seen the values to be predicted (Bro et al. 2008).",
    )
}

fn agreement(of: &Retention) -> Table {
    let groups = of.agreement();
    let applying = of.n_applying();
    let share = |group: &Agreement| format!("{} of {applying}", group.rules().len());
    let caption = match groups.first() {
        Some(group) => format!(
            "Where they agree: {} by {} rules that apply",
            counted(group.n_components(), "component"),
            share(group)
        ),
        None => "Where they agree: nowhere, for no rule applies".to_owned(),
    };
    let mut table = Table::new(caption)
        .column(
            TableColumn::counts("components", groups.iter().map(Agreement::n_components))
                .as_row_heads(),
        )
        .column(TableColumn::texts("given by", groups.iter().map(share)));
    for group in &groups {
        let names: Vec<&str> = group.rules().iter().map(|rule| rule.name()).collect();
        let components = counted(group.n_components(), "component");
        table = table.note(format!("{components}: {}.", names.join("; ")));
    }
    table.note(
        "Rules ask different questions, and several look at the same thing: a majority is no \
         proof. What the components are for and whether they can be interpreted is for the analyst \
         to weigh.",
    )
}

/// Reasons are sentences, so each stands in a note under the rules it silences.
fn without_answer(silent: &[&Verdict]) -> Table {
    let reasons: Vec<(&'static str, String)> = silent
        .iter()
        .filter_map(|verdict| Some((verdict.rule().name(), verdict.reason()?.to_string())))
        .collect();
    let groups = gathered(reasons.iter().map(|(name, reason)| (*name, reason.as_str())));
    let mut table = Table::new(format!(
        "{} not apply",
        match silent.len() {
            1 => "1 rule does".to_owned(),
            more => format!("{more} rules do"),
        }
    ));
    for (reason, names) in groups {
        table = table.note(format!("{}: {reason}.", names.join("; ")));
    }
    table
}

/// Equal remarks once, with all rules they are about.
fn gathered<'a>(
    remarks: impl Iterator<Item = (&'static str, &'a str)>,
) -> Vec<(&'a str, Vec<&'static str>)> {
    let mut groups: Vec<(&str, Vec<&'static str>)> = Vec::new();
    for (name, remark) in remarks {
        match groups.iter_mut().find(|(known, _)| *known == remark) {
            Some((_, names)) => names.push(name),
            None => groups.push((remark, vec![name])),
        }
    }
    groups
}
