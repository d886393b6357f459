//! Comparisons as tables.

use super::angles::PrincipalAngles;
use super::congruence::{Congruence, Similarity};
use super::procrustes::{Procrustes, ProcrustesTest};
use crate::exhibit::{
    Abridged, Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, significant, stacked,
};

const COEFFICIENTS: NumberFormat = NumberFormat::Decimals(3);
const MEASURES: NumberFormat = NumberFormat::Significant(4);
const MOST_COLUMNS: usize = 12;

/// Which components belong together, and all coefficients.
impl Exhibit for Congruence {
    fn exhibit(&self) -> Bundle {
        let pairs = self.pairs();
        let n_equal = pairs.iter().filter(|pair| pair.similarity() == Similarity::Equal).count();
        let mut matched = Table::new(format!(
            "{} of {} can be taken for equal",
            n_equal,
            counted(pairs.len(), "pair")
        ))
        .column(
            TableColumn::texts("first", pairs.iter().map(|pair| pair.first.as_str()))
                .as_row_heads(),
        )
        .column(TableColumn::texts("second", pairs.iter().map(|pair| pair.second.as_str())))
        .column(TableColumn::numbers(
            "congruence",
            pairs.iter().map(|pair| pair.coefficient),
            COEFFICIENTS,
        ))
        .column(TableColumn::texts(
            "verdict",
            pairs.iter().map(|pair| pair.similarity().to_string()),
        ))
        .note(
            "Pairs with the largest sum of absolute congruence (Tucker 1951). Verdicts by Lorenzo-Seva \
             and ten Berge (2006): 0.95 and above can be taken for equal, 0.85 to 0.95 fairly similar; \
             a rule of thumb, not a test. A negative sign says that one is the other turned round.",
        );
        for (which, alone) in [("first", self.first_alone()), ("second", self.second_alone())] {
            if !alone.is_empty() {
                let names = alone.join(", ");
                matched = matched.note(format!("Without a partner, of the {which}: {names}."));
            }
        }
        stacked(&[&matched, &coefficients(self)])
    }
}

fn coefficients(congruence: &Congruence) -> Table {
    let values = congruence.coefficients();
    let shown = values.n_cols().min(MOST_COLUMNS);
    let mut table = Table::new("Congruence coefficients: first down, second across").column(
        TableColumn::texts("first", values.row_names().iter().map(String::as_str)).as_row_heads(),
    );
    for (name, column) in values.column_names().iter().zip(values.column_iter()).take(shown) {
        table = table.column(
            TableColumn::numbers(name.clone(), column.iter().copied(), COEFFICIENTS)
                .shaded_up_to(1.0),
        );
    }
    if shown < values.n_cols() {
        table = table.column(TableColumn::left_out(values.n_cols() - shown, values.n_rows()));
    }
    table
}

/// Angles with their cosines.
impl Exhibit for PrincipalAngles {
    fn exhibit(&self) -> Bundle {
        let degrees = self.degrees();
        let (first, second) = self.ranks();
        Table::new(format!(
            "Spaces of {first} and {second} dimensions: the largest angle is {} degrees",
            significant(self.largest_degrees(), 3)
        ))
        .column(TableColumn::counts("angle", 1..=degrees.len()).as_row_heads())
        .column(TableColumn::numbers("degrees", degrees.iter().copied(), MEASURES))
        .column(TableColumn::numbers("cosine", self.cosines().iter().copied(), MEASURES))
        .note(
            "0 degrees: a direction that both have; 90: one that the other knows nothing of \
             (Björck and Golub 1973). Dimensions are numerical ranks.",
        )
        .exhibit()
    }
}

/// How well the second configuration fits, and the rows that fit worst.
impl Exhibit for Procrustes {
    fn exhibit(&self) -> Bundle {
        let names = self.fitted().row_names();
        let residuals = self.residuals();
        let mut order: Vec<usize> = (0..names.len()).collect();
        order.sort_by(|&a, &b| residuals[b].total_cmp(&residuals[a]));
        let shown = Abridged::of(order.len(), 12, 12, 0);
        let worst: Vec<usize> = shown.indices().map(|place| order[place]).collect();
        let options = self.options();
        let allowed = match (options.has_translation(), options.has_scaling()) {
            (true, true) => "turned, reflected, shifted and stretched",
            (true, false) => "turned, reflected and shifted",
            (false, true) => "turned, reflected and stretched",
            (false, false) => "turned and reflected",
        };
        Table::new(format!(
            "Two configurations: correlation {}, m² = {}",
            significant(self.correlation(), 4),
            significant(self.m_squared(), 4)
        ))
        .with_rows_left_out(shown.head, shown.left_out)
        .column(
            TableColumn::texts("row", worst.iter().map(|&row| names[row].as_str())).as_row_heads(),
        )
        .column(TableColumn::numbers("distance", worst.iter().map(|&row| residuals[row]), MEASURES))
        .note(format!(
            "The second was {allowed} to fit the first; factor {}. Sum of squared distances {}, \
             {} of the first's sum of squares. Rows by descending distance.",
            significant(self.scale(), 4),
            significant(self.residual_sum_of_squares(), 4),
            NumberFormat::Percent.format(self.residual_share())
        ))
        .note(
            "m² (Gower 1975) is that of the best stretching and the same whichever comes first; \
             correlation = √(1 − m²).",
        )
        .exhibit()
    }
}

/// The statistic and its p-value.
impl Exhibit for ProcrustesTest {
    fn exhibit(&self) -> Bundle {
        Table::new(format!(
            "Association of two configurations: p = {}",
            significant(self.p_value(), 3)
        ))
        .column(TableColumn::numbers("correlation", [self.correlation()], MEASURES))
        .column(TableColumn::numbers("m²", [self.m_squared()], MEASURES))
        .column(TableColumn::counts("as large or larger", [self.n_as_large()]))
        .column(TableColumn::counts("permutations", [self.n_permutations()]))
        .note(format!(
            "{} of {}, seed {}; p = (1 + as large or larger) / (1 + permutations). After Jackson (1995); \
             rows must be exchangeable when there is no relation.",
            counted(self.n_permutations(), "permutation"),
            counted(self.n_rows(), "row"),
            self.seed()
        ))
        .exhibit()
    }
}
