//! Generate constructs. `else if` stays nested: the `else` branch is an unscoped block that holds one conditional, which is
//! what IEEE 1800-2017 clause 27.5 calls a direct nesting.

use sv_parser as sv;

use super::Converter;
use super::assignments::blocking;
use super::ast::{Assignment, Expr, GenBlock, GenvarInit, Item, ItemKind};

impl Converter<'_> {
    pub(super) fn generate_region(&self, region: &sv::GenerateRegion) -> Item {
        let span = self.span(region);
        let items = self.generate_items(&region.nodes.1);
        self.item(ItemKind::GenBlock(GenBlock { label: None, scoped: false, items, span }), span)
    }

    fn generate_items(&self, list: &[sv::GenerateItem]) -> Vec<Item> {
        let mut items = Vec::new();
        for item in list {
            self.generate_item(item, &mut items);
        }
        items
    }

    fn generate_item(&self, item: &sv::GenerateItem, items: &mut Vec<Item>) {
        match item {
            sv::GenerateItem::ModuleOrGenerateItem(x) => self.module_or_generate_item(x, items),
            sv::GenerateItem::InterfaceOrGenerateItem(x) => self.interface_or_generate_item(x, items),
            sv::GenerateItem::CheckerOrGenerateItem(x) => self.checker_or_generate_item(x, items),
        }
    }

    fn generate_block(&self, block: &sv::GenerateBlock) -> GenBlock {
        let span = self.span(block);
        match block {
            sv::GenerateBlock::GenerateItem(x) => {
                let mut items = Vec::new();
                self.generate_item(x, &mut items);
                GenBlock { label: None, scoped: false, items, span }
            }
            sv::GenerateBlock::Multiple(x) => {
                let (before, _, after, list, _, _) = &x.nodes;
                let label = match (before, after) {
                    (_, Some((_, label))) | (Some((label, _)), None) => Some(self.ident(&label.nodes.0)),
                    (None, None) => None,
                };
                GenBlock { label, scoped: true, items: self.generate_items(list), span }
            }
        }
    }

    pub(super) fn generate_for(&self, construct: &sv::LoopGenerateConstruct) -> Item {
        let (_, header, body) = &construct.nodes;
        let (init, _, cond, _, step) = &header.nodes.1;
        let (genvar, name, _, value) = &init.nodes;
        let init = GenvarInit {
            name: self.ident(&name.nodes.0),
            declares: genvar.is_some(),
            value: self.constant_expression(value),
        };
        let kind = ItemKind::GenFor {
            init,
            cond: self.genvar_expression(cond),
            step: self.genvar_step(step),
            body: self.generate_block(body),
        };
        self.item(kind, self.span(construct))
    }

    fn genvar_step(&self, step: &sv::GenvarIteration) -> Assignment {
        match step {
            sv::GenvarIteration::Assignment(x) => {
                let (name, operator, value) = &x.nodes;
                let op = self.assignment_operator(operator);
                blocking(self.name_expr(&name.nodes.0), op, self.genvar_expression(value))
            }
            sv::GenvarIteration::Prefix(x) => self.step_by_one(&x.nodes.0, self.name_expr(&x.nodes.1.nodes.0)),
            sv::GenvarIteration::Suffix(x) => self.step_by_one(&x.nodes.1, self.name_expr(&x.nodes.0.nodes.0)),
        }
    }

    pub(super) fn generate_conditional(&self, construct: &sv::ConditionalGenerateConstruct) -> Item {
        let kind = match construct {
            sv::ConditionalGenerateConstruct::If(x) => {
                let (_, cond, then, otherwise) = &x.nodes;
                ItemKind::GenIf {
                    cond: self.constant_expression(&cond.nodes.1),
                    then: self.generate_block(then),
                    otherwise: otherwise.as_ref().map(|(_, block)| self.generate_block(block)),
                }
            }
            sv::ConditionalGenerateConstruct::Case(x) => {
                let (_, subject, list, _) = &x.nodes;
                let mut arms: Vec<(Vec<Expr>, GenBlock)> = Vec::new();
                let mut default = None;
                for item in list {
                    match item {
                        sv::CaseGenerateItem::Nondefault(x) => {
                            let (labels, _, block) = &x.nodes;
                            let labels = labels.contents().into_iter().map(|label| self.constant_expression(label));
                            arms.push((labels.collect(), self.generate_block(block)));
                        }
                        sv::CaseGenerateItem::Default(_) if default.is_some() => {
                            return self.unsupported("case generate with more than one default", self.span(construct));
                        }
                        sv::CaseGenerateItem::Default(x) => default = Some(self.generate_block(&x.nodes.2)),
                    }
                }
                ItemKind::GenCase { subject: self.constant_expression(&subject.nodes.1), arms, default }
            }
        };
        self.item(kind, self.span(construct))
    }
}
