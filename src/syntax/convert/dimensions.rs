//! Packed and unpacked dimensions. Dynamic, associative and queue dimensions are kept as a place only.

use sv_parser as sv;

use super::Converter;
use super::ast::Dim;

impl Converter<'_> {
    pub(super) fn packed_dims(&self, dims: &[sv::PackedDimension]) -> Vec<Dim> {
        dims.iter().map(|dim| self.packed_dim(dim)).collect()
    }

    pub(super) fn packed_dim(&self, dim: &sv::PackedDimension) -> Dim {
        match dim {
            sv::PackedDimension::Range(x) => self.range_dim(&x.nodes.0.nodes.1),
            sv::PackedDimension::UnsizedDimension(x) => Dim::Dynamic(self.span(&**x)),
        }
    }

    pub(super) fn unpacked_dims(&self, dims: &[sv::UnpackedDimension]) -> Vec<Dim> {
        dims.iter().map(|dim| self.unpacked_dim(dim)).collect()
    }

    fn unpacked_dim(&self, dim: &sv::UnpackedDimension) -> Dim {
        match dim {
            sv::UnpackedDimension::Range(x) => self.range_dim(&x.nodes.0.nodes.1),
            sv::UnpackedDimension::Expression(x) => match &x.nodes.0.nodes.1 {
                // `[$]`, a queue.
                sv::ConstantExpression::ConstantPrimary(size) if matches!(**size, sv::ConstantPrimary::Dollar(_)) => {
                    Dim::Dynamic(self.span(&**x))
                }
                size => Dim::Size(self.constant_expression(size)),
            },
        }
    }

    pub(super) fn variable_dims(&self, dims: &[sv::VariableDimension]) -> Vec<Dim> {
        dims.iter()
            .map(|dim| match dim {
                sv::VariableDimension::UnpackedDimension(x) => self.unpacked_dim(x),
                sv::VariableDimension::UnsizedDimension(x) => Dim::Dynamic(self.span(&**x)),
                sv::VariableDimension::AssociativeDimension(x) => match &**x {
                    // A name in brackets may be the constant size or the index type of an associative array.
                    sv::AssociativeDimension::DataType(x) => self.name_dim(&x.nodes.0.nodes.1, dim),
                    sv::AssociativeDimension::Asterisk(x) => Dim::Dynamic(self.span(&**x)),
                },
                sv::VariableDimension::QueueDimension(x) => Dim::Dynamic(self.span(&**x)),
            })
            .collect()
    }

    fn name_dim(&self, ty: &sv::DataType, dim: &sv::VariableDimension) -> Dim {
        let name = self.name_or_type(self.data_type(ty));
        match name.kind {
            super::ast::ExprKind::Type(_) => Dim::Dynamic(self.span(dim)),
            _ => Dim::Size(name),
        }
    }

    fn range_dim(&self, range: &sv::ConstantRange) -> Dim {
        let (left, right) = self.constant_range(range);
        Dim::Range(left, right)
    }
}
