//! Parameters. In a header `#( ... )` the keyword may be left out, and the declaration then continues the one before: after
//! `localparam` everything is local until the next `parameter` (IEEE 1800-2017 clause 6.20.1).

use sv_parser as sv;

use super::Converter;
use super::ast::{Connection, DataType, DataTypeKind, Param, ParamKind};

impl Converter<'_> {
    pub(super) fn header_params(&self, list: &Option<sv::ParameterPortList>) -> Vec<Param> {
        let mut params = Vec::new();
        let mut local = false;
        match list {
            None | Some(sv::ParameterPortList::Empty(_)) => {}
            Some(sv::ParameterPortList::Assignment(x)) => {
                let (first, more) = &x.nodes.1.nodes.1;
                params.extend(self.value_params(first, local, None));
                for (_, declaration) in more {
                    self.header_param(declaration, &mut local, &mut params);
                }
            }
            Some(sv::ParameterPortList::Declaration(x)) => {
                for declaration in x.nodes.1.nodes.1.contents() {
                    self.header_param(declaration, &mut local, &mut params);
                }
            }
        }
        params
    }

    fn header_param(&self, declaration: &sv::ParameterPortDeclaration, local: &mut bool, params: &mut Vec<Param>) {
        match declaration {
            sv::ParameterPortDeclaration::ParameterDeclaration(x) => {
                *local = false;
                params.extend(self.parameter_declaration(x));
            }
            sv::ParameterPortDeclaration::LocalParameterDeclaration(x) => {
                *local = true;
                params.extend(self.local_parameter_declaration(x));
            }
            sv::ParameterPortDeclaration::ParamList(x) => {
                let (ty, list) = &x.nodes;
                params.extend(self.value_params(list, *local, Some(self.data_type(ty))));
            }
            sv::ParameterPortDeclaration::TypeList(x) => params.extend(self.type_params(&x.nodes.1, *local)),
        }
    }

    pub(super) fn parameter_declaration(&self, declaration: &sv::ParameterDeclaration) -> Vec<Param> {
        match declaration {
            sv::ParameterDeclaration::Param(x) => {
                let (_, ty, list) = &x.nodes;
                self.value_params(list, false, self.param_type(ty))
            }
            sv::ParameterDeclaration::Type(x) => self.type_params(&x.nodes.2, false),
        }
    }

    pub(super) fn local_parameter_declaration(&self, declaration: &sv::LocalParameterDeclaration) -> Vec<Param> {
        match declaration {
            sv::LocalParameterDeclaration::Param(x) => {
                let (_, ty, list) = &x.nodes;
                self.value_params(list, true, self.param_type(ty))
            }
            sv::LocalParameterDeclaration::Type(x) => self.type_params(&x.nodes.2, true),
        }
    }

    /// Nothing when neither a type nor a sign nor a range is written: the parameter then takes the type of its value.
    fn param_type(&self, ty: &sv::DataTypeOrImplicit) -> Option<DataType> {
        let ty = self.data_type_or_implicit(ty);
        let bare = matches!(ty.kind, DataTypeKind::Implicit) && ty.packed.is_empty() && ty.signed.is_none();
        (!bare).then_some(ty)
    }

    fn value_params(&self, list: &sv::ListOfParamAssignments, local: bool, ty: Option<DataType>) -> Vec<Param> {
        let param = |assignment: &sv::ParamAssignment| {
            let (name, dims, value) = &assignment.nodes;
            let kind = ParamKind::Value {
                ty: ty.clone(),
                dims: self.unpacked_dims(dims),
                default: value.as_ref().map(|(_, value)| self.constant_param_expression(value)),
            };
            Param { name: self.ident(&name.nodes.0), local, kind, span: self.span(assignment) }
        };
        list.nodes.0.contents().into_iter().map(param).collect()
    }

    fn type_params(&self, list: &sv::ListOfTypeAssignments, local: bool) -> Vec<Param> {
        let param = |assignment: &sv::TypeAssignment| {
            let (name, ty) = &assignment.nodes;
            let kind = ParamKind::Type { default: ty.as_ref().map(|(_, ty)| self.data_type(ty)) };
            Param { name: self.ident(&name.nodes.0), local, kind, span: self.span(assignment) }
        };
        list.nodes.0.contents().into_iter().map(param).collect()
    }

    /// The overrides `#( ... )` of an instance.
    pub(super) fn param_overrides(&self, assignment: &Option<sv::ParameterValueAssignment>) -> Vec<Connection> {
        let Some(list) = assignment.as_ref().and_then(|assignment| assignment.nodes.1.nodes.1.as_ref()) else {
            return Vec::new();
        };
        match list {
            sv::ListOfParameterAssignments::Ordered(x) => {
                let values = x.nodes.0.contents().into_iter();
                values
                    .map(|value| Connection::Ordered(Some(self.param_expression(&value.nodes.0)), self.span(value)))
                    .collect()
            }
            sv::ListOfParameterAssignments::Named(x) => {
                let values = x.nodes.0.contents().into_iter();
                values
                    .map(|value| {
                        let (_, name, value) = &value.nodes;
                        let value = value.nodes.1.as_ref().map(|value| self.param_expression(value));
                        Connection::Named { name: self.ident(&name.nodes.0), value }
                    })
                    .collect()
            }
        }
    }
}
