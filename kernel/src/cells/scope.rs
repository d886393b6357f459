//! What a session defines, as help needs it.

use std::collections::BTreeMap;

use super::engine::Engine;
use super::naming;
use super::parse::{self, ItemForm, Namespace};
use super::types::{ItemInfo, ItemKind, Scope, VariableInfo};

impl Engine {
    /// What the session defines.
    pub fn scope(&self) -> Scope {
        let variables = self.account.variables.iter().map(|(name, variable)| VariableInfo {
            name: name.clone(),
            type_text: naming::readable(&variable.type_text),
            mutable: variable.mutable,
            cell: variable.cell,
        });
        let mut items: BTreeMap<(String, &'static str), ItemInfo> = BTreeMap::new();
        for ((space, name), defined) in &self.account.items {
            let item = defined.item();
            let Some(kind) = kind_of(*space, item) else { continue };
            let info = ItemInfo {
                name: name.clone(),
                kind,
                signature: item.signature.clone(),
                docs: item.docs.clone(),
                cell: defined.part.cell.number,
                methods: self.methods_of(name, &item.form),
            };
            let space = if matches!(item.form, ItemForm::Data) { "data" } else { "other" };
            items.insert((name.clone(), space), info);
        }
        Scope { variables: variables.collect(), items: items.into_values().collect() }
    }

    fn methods_of(&self, name: &str, form: &ItemForm) -> Vec<(String, String, String)> {
        if !matches!(form, ItemForm::Data | ItemForm::Trait(_)) {
            return Vec::new();
        }
        let mut methods = BTreeMap::new();
        for found in self.account.crates.values() {
            for item in found.parts.iter().flat_map(|part| &part.items) {
                if let ItemForm::Impl(block) = &item.form
                    && block.self_head.as_deref() == Some(name)
                {
                    methods.extend(
                        block.methods.iter().map(|method| (method.0.clone(), method.clone())),
                    );
                }
            }
        }
        methods.into_values().collect()
    }
}

fn kind_of(space: Namespace, item: &parse::Item) -> Option<ItemKind> {
    Some(match &item.form {
        ItemForm::Function => ItemKind::Function,
        ItemForm::Data if space == Namespace::Value => return None,
        ItemForm::Data if item.signature.starts_with("enum ") => ItemKind::Enum,
        ItemForm::Data => ItemKind::Struct,
        ItemForm::Trait(_) => ItemKind::Trait,
        ItemForm::Constant => ItemKind::Const,
        ItemForm::Static => ItemKind::Static,
        ItemForm::Module => ItemKind::Module,
        ItemForm::Alias => ItemKind::TypeAlias,
        ItemForm::Macro => ItemKind::Macro,
        _ => return None,
    })
}
