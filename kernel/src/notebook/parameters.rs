//! Values given for one run: `--set name=value` for variables that cells tagged `parameters` declare.
//!
//! The declaration says what fits. `let n_draws = 1000;` takes a whole number, `let limit: f64 = 2.0;`
//! any number, `let kiln = "north";` any text. The value is written into the cell in place of the one
//! that stands there, as a literal, so that nothing that is given can be anything but a value.

use syn::spanned::Spanned;

use super::document::Document;
use crate::cells::names::header_length;

/// The tag on cells whose variables can be set.
const TAG: &str = "parameters";

/// A value that was put in place of another.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Applied {
    /// The variable.
    pub name: String,
    /// The value as it was given.
    pub value: String,
    /// The text that it stands in place of.
    pub instead_of: String,
    /// The cell, from 0.
    pub cell_idx: usize,
}

/// Why a value cannot be set.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum ParameterFault {
    /// There is no `=` in it.
    #[error("--set {given:?} has no name and value; name=value is accepted")]
    NoPair {
        /// What was given.
        given: String,
    },
    /// One name, two values.
    #[error("--set gives `{name}` twice")]
    Twice {
        /// The name.
        name: String,
    },
    /// No tagged cell declares it.
    #[error(
        "no cell tagged `parameters` declares `{name}` by a plain `let`; {}",
        if known.is_empty() { "none declares anything".to_owned() }
        else { format!("they declare {}", known.join(", ")) }
    )]
    Unknown {
        /// The name.
        name: String,
        /// What could be set.
        known: Vec<String>,
    },
    /// The value is of another type.
    #[error("`{name}` is declared as {wanted}, and {value:?} is none")]
    Unfit {
        /// The name.
        name: String,
        /// The value.
        value: String,
        /// What fits, in words.
        wanted: String,
    },
    /// The declaration is more than a literal.
    #[error(
        "`{name}` is declared as `{declared}`; numbers, `true` and `false`, characters and text can be set"
    )]
    NotALiteral {
        /// The name.
        name: String,
        /// The declaration.
        declared: String,
    },
}

/// Puts values into the cells that declare the variables.
///
/// # Errors
/// A value without a name, a name that no tagged cell declares, a value that does not fit.
pub fn apply(document: &mut Document, given: &[String]) -> Result<Vec<Applied>, ParameterFault> {
    let mut applied: Vec<Applied> = Vec::new();
    for given in given {
        let pair = given.split_once('=').map(|(name, value)| (name.trim(), value));
        let Some((name, value)) = pair.filter(|(name, _)| !name.is_empty()) else {
            return Err(ParameterFault::NoPair { given: given.clone() });
        };
        if applied.iter().any(|other| other.name == name) {
            return Err(ParameterFault::Twice { name: name.to_owned() });
        }
        let mut known = Vec::new();
        let mut found = None;
        for cell_idx in 0..document.n_cells() {
            if !document.has_tag(cell_idx, TAG) || document.code(cell_idx).is_none() {
                continue;
            }
            for declaration in declarations(&document.source(cell_idx)) {
                if declaration.name == name {
                    // The last declaration of a name is the one that later cells see.
                    found = Some((cell_idx, declaration.clone()));
                }
                known.push(format!("`{}`", declaration.name));
            }
        }
        let Some((cell_idx, declaration)) = found else {
            return Err(ParameterFault::Unknown { name: name.to_owned(), known });
        };
        let literal = declaration.literal(value)?;
        let mut text = document.source(cell_idx);
        let instead_of = text[declaration.range.clone()].to_owned();
        text.replace_range(declaration.range.clone(), &literal);
        document.set_source(cell_idx, &text);
        let (name, value) = (name.to_owned(), value.to_owned());
        applied.push(Applied { name, value, instead_of, cell_idx });
    }
    Ok(applied)
}

/// A variable that a cell declares with a value.
#[derive(Debug, Clone)]
struct Declaration {
    name: String,
    /// Where its value stands in the cell.
    range: std::ops::Range<usize>,
    /// Its type, if it is written out.
    type_text: Option<String>,
    /// What its value is.
    value: Written,
}

/// What stands behind the equals sign.
#[derive(Debug, Clone, PartialEq, Eq)]
enum Written {
    /// A whole number, and the type that is written at its end.
    Whole(String),
    /// A number, and the type that is written at its end.
    Number(String),
    Truth,
    Character,
    /// A string literal.
    Text,
    /// A string literal made into a `String`; what stands around it.
    Owned(String, String),
    /// Anything else.
    Other(String),
}

/// The variables that a cell declares by a plain `let name = value;`.
fn declarations(cell: &str) -> Vec<Declaration> {
    let start = header_length(cell);
    let parsed = syn::parse::Parser::parse_str(syn::Block::parse_within, &cell[start..]);
    let statements = parsed.unwrap_or_default();
    let mut found = Vec::new();
    for statement in &statements {
        let syn::Stmt::Local(local) = statement else { continue };
        let (pattern, type_text) = match &local.pat {
            syn::Pat::Type(typed) => (&*typed.pat, Some(spelled(&typed.ty))),
            other => (other, None),
        };
        let (syn::Pat::Ident(name), Some(init)) = (pattern, &local.init) else { continue };
        let bytes = init.expr.span().byte_range();
        let range = start + bytes.start..start + bytes.end;
        let Some(text) = cell.get(range.clone()) else { continue };
        let value = written(&init.expr, text);
        let name = name.ident.to_string().trim_start_matches("r#").to_owned();
        found.push(Declaration { name, range, type_text, value });
    }
    found
}

fn spelled(ty: &syn::Type) -> String {
    use quote::ToTokens;
    ty.to_token_stream().to_string().replace(' ', "")
}

fn written(expression: &syn::Expr, text: &str) -> Written {
    match expression {
        syn::Expr::Lit(literal) => match &literal.lit {
            syn::Lit::Int(number) => Written::Whole(number.suffix().to_owned()),
            syn::Lit::Float(number) => Written::Number(number.suffix().to_owned()),
            syn::Lit::Bool(_) => Written::Truth,
            syn::Lit::Char(_) => Written::Character,
            syn::Lit::Str(_) => Written::Text,
            _ => Written::Other(text.to_owned()),
        },
        syn::Expr::Unary(unary) if matches!(unary.op, syn::UnOp::Neg(_)) => {
            match written(&unary.expr, text) {
                whole @ (Written::Whole(_) | Written::Number(_)) => whole,
                _ => Written::Other(text.to_owned()),
            }
        }
        syn::Expr::MethodCall(call)
            if call.args.is_empty()
                && ["to_owned", "to_string", "into"].iter().any(|name| call.method == name)
                && written(&call.receiver, text) == Written::Text =>
        {
            Written::Owned(String::new(), format!(".{}()", call.method))
        }
        syn::Expr::Call(call) if call.args.len() == 1 => {
            let from = text.find('(').map_or("", |end| &text[..=end]);
            match call.args.first().map(|argument| written(argument, text)) {
                Some(Written::Text) if from.ends_with("String::from(") => {
                    Written::Owned(from.to_owned(), ")".to_owned())
                }
                _ => Written::Other(text.to_owned()),
            }
        }
        _ => Written::Other(text.to_owned()),
    }
}

impl Declaration {
    /// The value as a literal that fits the declaration.
    fn literal(&self, value: &str) -> Result<String, ParameterFault> {
        let unfit = |wanted: &str| ParameterFault::Unfit {
            name: self.name.clone(),
            value: value.to_owned(),
            wanted: wanted.to_owned(),
        };
        let trimmed = value.trim();
        let suffix = match &self.value {
            Written::Whole(suffix) | Written::Number(suffix) => suffix.as_str(),
            _ => "",
        };
        let named = self.type_text.as_deref().or((!suffix.is_empty()).then_some(suffix));
        let text = |before: &str, after: &str| format!("{before}{value:?}{after}");
        match (named, &self.value) {
            (Some("f64" | "f32"), Written::Whole(_) | Written::Number(_))
            | (None, Written::Number(_)) => {
                let single = named == Some("f32");
                let number = match single {
                    true => trimmed.parse::<f32>().map(f64::from),
                    false => trimmed.parse::<f64>(),
                };
                let number = number.ok().filter(|number| number.is_finite());
                let number = number.ok_or_else(|| unfit("a number"))?;
                let digits = match single {
                    true => format!("{:?}", number as f32),
                    false => format!("{number:?}"),
                };
                Ok(format!("{digits}{suffix}"))
            }
            (named, Written::Whole(_)) => {
                let range = named.unwrap_or("a whole number");
                let fits = match named {
                    Some(name) => fits(name, trimmed),
                    None => Some(trimmed.parse::<i128>().is_ok()),
                };
                match fits {
                    Some(true) => {
                        let number = trimmed.trim_start_matches('+');
                        Ok(format!("{number}{suffix}"))
                    }
                    Some(false) => Err(unfit(&match named {
                        Some(_) => format!("a whole number of type {range}"),
                        None => range.to_owned(),
                    })),
                    None => Err(self.not_a_literal()),
                }
            }
            (None | Some("bool"), Written::Truth) => match trimmed {
                "true" | "false" => Ok(trimmed.to_owned()),
                _ => Err(unfit("`true` or `false`")),
            },
            (None | Some("char"), Written::Character) => {
                let mut chars = value.chars();
                match (chars.next(), chars.next()) {
                    (Some(c), None) => Ok(format!("{c:?}")),
                    _ => Err(unfit("one character")),
                }
            }
            (None | Some("&str" | "&'staticstr"), Written::Text) => Ok(text("", "")),
            (None | Some("String"), Written::Owned(before, after)) => Ok(text(before, after)),
            _ => Err(self.not_a_literal()),
        }
    }

    fn not_a_literal(&self) -> ParameterFault {
        let type_text = self.type_text.as_ref().map_or(String::new(), |text| format!(": {text}"));
        let value = match &self.value {
            Written::Other(text) => text.clone(),
            _ => "…".to_owned(),
        };
        let declared = format!("let {}{type_text} = {value};", self.name);
        ParameterFault::NotALiteral { name: self.name.clone(), declared }
    }
}

/// Whether a text is a number of an integer type; `None` if there is no such type.
fn fits(type_name: &str, text: &str) -> Option<bool> {
    macro_rules! one_of {
        ($($name:ident)*) => {
            match type_name {
                $(stringify!($name) => Some(text.parse::<$name>().is_ok()),)*
                _ => None,
            }
        };
    }
    one_of!(u8 u16 u32 u64 u128 usize i8 i16 i32 i64 i128 isize)
}

#[cfg(test)]
mod tests {
    use super::*;

    const CELL: &str = "let n_draws = 1000;\nlet limit: f64 = 2.0;\nlet share = 0.5f32;\n\
        let kiln = \"north\"; let owner = String::from(\"mill\");\nlet name = \"a\".to_owned();\n\
        let deep: bool = true; let mark = 'x'; let small: u8 = 3; let shift: i32 = -4;\n\
        let list = vec![1, 2]; let whole: f64 = 3.0;\n";

    fn with(cell: &str, given: &[&str]) -> Result<String, String> {
        let mut document = Document::of_code([("a".to_owned(), cell.to_owned())]);
        let mut value: serde_json::Value = serde_json::from_str(&document.text()).unwrap();
        value["cells"][0]["metadata"]["tags"] = serde_json::json!(["parameters"]);
        let path = std::path::Path::new("x.ipynb");
        document = Document::parse(value.to_string().as_bytes(), path).unwrap();
        let given: Vec<String> = given.iter().map(|text| (*text).to_owned()).collect();
        apply(&mut document, &given).map_err(|fault| fault.to_string())?;
        Ok(document.source(0))
    }

    #[test]
    fn values_are_written_in_as_their_declarations_want_them() {
        for (given, expected) in [
            ("n_draws=50", "let n_draws = 50;"),
            ("limit=3", "let limit: f64 = 3.0;"),
            ("limit=1e-3", "let limit: f64 = 0.001;"),
            ("share=0.25", "let share = 0.25f32;"),
            ("kiln=a \"b\" \\ é", "let kiln = \"a \\\"b\\\" \\\\ é\";"),
            ("kiln=", "let kiln = \"\";"),
            ("owner=x", "let owner = String::from(\"x\");"),
            ("name=x=y", "let name = \"x=y\".to_owned();"),
            ("deep=false", "let deep: bool = false;"),
            ("mark='", "let mark = '\\'';"),
            ("small=255", "let small: u8 = 255;"),
            ("shift=7", "let shift: i32 = 7;"),
        ] {
            let text = with(CELL, &[given]).unwrap();
            assert!(text.contains(expected), "{given}: {text}");
        }
        let both = with(CELL, &["n_draws=1", "small=2"]).unwrap();
        assert!(both.contains("n_draws = 1;") && both.contains("small: u8 = 2;"));
        let headed = with("---\n[cell]\nseed = 1\n---\nlet n = 1;\n", &["n=2"]).unwrap();
        assert_eq!(headed, "---\n[cell]\nseed = 1\n---\nlet n = 2;\n");
    }

    #[test]
    fn what_does_not_fit_is_refused_by_what_would() {
        for (given, expected) in [
            ("n_draws=many", "`n_draws` is declared as a whole number, and \"many\" is none"),
            ("n_draws=1.5", "a whole number"),
            ("n_draws=1; panic!()", "a whole number"),
            ("limit=NaN", "`limit` is declared as a number"),
            ("small=256", "a whole number of type u8"),
            ("small=-1", "a whole number of type u8"),
            ("deep=yes", "`true` or `false`"),
            ("mark=ab", "one character"),
            ("list=3", "`list` is declared as `let list = vec![1, 2];`"),
            ("nothing=3", "no cell tagged `parameters` declares `nothing`"),
            ("nothing=3", "`n_draws`, `limit`"),
            ("=3", "name=value is accepted"),
            ("n_draws", "name=value is accepted"),
        ] {
            let refused = with(CELL, &[given]).unwrap_err();
            assert!(refused.contains(expected), "{given}: {refused}");
        }
        assert!(with(CELL, &["small=1", "small=2"]).unwrap_err().contains("twice"));
        assert!(with("x", &["x=1"]).unwrap_err().contains("none declares anything"));
    }
}
