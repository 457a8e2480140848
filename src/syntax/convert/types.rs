//! Data types: vectors, atoms, structures, enumerations, names. A class type without parameters is a plain name to us,
//! since the parser cannot tell the two apart.

use sv_parser as sv;

use super::Converter;
use super::ast::{DataType, DataTypeKind, Declarator, EnumMember, Member};
use super::names::Scope;
use crate::source::Span;

impl Converter<'_> {
    /// A type without dimensions and signing.
    pub(super) fn plain_type(&self, kind: DataTypeKind, span: Span) -> DataType {
        DataType { kind, packed: Vec::new(), signed: None, span }
    }

    pub(super) fn data_type(&self, ty: &sv::DataType) -> DataType {
        let span = self.span(ty);
        match ty {
            sv::DataType::Vector(x) => {
                let (vector, signing, dims) = &x.nodes;
                DataType {
                    kind: vector_kind(vector),
                    packed: self.packed_dims(dims),
                    signed: signing_of(signing),
                    span,
                }
            }
            sv::DataType::Atom(x) => {
                let (atom, signing) = &x.nodes;
                DataType { kind: atom_kind(atom), packed: Vec::new(), signed: signing_of(signing), span }
            }
            sv::DataType::NonIntegerType(_) => self.plain_type(DataTypeKind::Real, span),
            sv::DataType::StructUnion(x) => self.struct_union(x, span),
            sv::DataType::Enum(x) => self.enumeration(x, span),
            sv::DataType::String(_) => self.plain_type(DataTypeKind::String, span),
            // The parser reports `event` as a `chandle` too.
            sv::DataType::Chandle(x) | sv::DataType::Event(x) => {
                let event = self.keyword(x) == "event";
                self.plain_type(if event { DataTypeKind::Event } else { DataTypeKind::Chandle }, span)
            }
            sv::DataType::Virtual(_) => {
                self.plain_type(DataTypeKind::Unsupported("virtual interface".to_string()), span)
            }
            sv::DataType::Type(x) => {
                let (scope, name, dims) = &x.nodes;
                let named = self.named_type(self.package_or_class(scope), &name.nodes.0);
                DataType { packed: self.packed_dims(dims), span, ..named }
            }
            sv::DataType::ClassType(x) => {
                let (class, parameters, nested) = &x.nodes;
                let (scope, name) = &class.nodes;
                if parameters.is_some() || !nested.is_empty() {
                    return self.plain_type(DataTypeKind::Unsupported("class type".to_string()), span);
                }
                self.named_type(self.optional_package(scope), &name.nodes.0)
            }
            sv::DataType::PsCovergroupIdentifier(x) => {
                let (scope, name) = &x.nodes;
                self.named_type(self.optional_package(scope), &name.nodes.0)
            }
            sv::DataType::TypeReference(x) => self.type_reference(x),
        }
    }

    pub(super) fn data_type_or_implicit(&self, ty: &sv::DataTypeOrImplicit) -> DataType {
        match ty {
            sv::DataTypeOrImplicit::DataType(x) => self.data_type(x),
            sv::DataTypeOrImplicit::ImplicitDataType(x) => self.implicit_type(x),
        }
    }

    pub(super) fn implicit_type(&self, ty: &sv::ImplicitDataType) -> DataType {
        let (signing, dims) = &ty.nodes;
        DataType {
            kind: DataTypeKind::Implicit,
            packed: self.packed_dims(dims),
            signed: signing_of(signing),
            span: self.span(ty),
        }
    }

    pub(super) fn data_type_or_void(&self, ty: &sv::DataTypeOrVoid) -> DataType {
        match ty {
            sv::DataTypeOrVoid::DataType(x) => self.data_type(x),
            sv::DataTypeOrVoid::Void(x) => self.plain_type(DataTypeKind::Void, self.span(&**x)),
        }
    }

    pub(super) fn simple_type(&self, ty: &sv::SimpleType) -> DataType {
        match ty {
            sv::SimpleType::IntegerType(x) => match &**x {
                sv::IntegerType::IntegerVectorType(x) => self.plain_type(vector_kind(x), self.span(&**x)),
                sv::IntegerType::IntegerAtomType(x) => self.atom_type(x),
            },
            sv::SimpleType::NonIntegerType(x) => self.plain_type(DataTypeKind::Real, self.span(&**x)),
            sv::SimpleType::PsTypeIdentifier(x) => self.ps_type(x),
            sv::SimpleType::PsParameterIdentifier(x) => match &**x {
                sv::PsParameterIdentifier::Scope(x) => {
                    let (scope, name) = &x.nodes;
                    self.named_type(self.package_or_class(scope), &name.nodes.0)
                }
                sv::PsParameterIdentifier::Generate(_) => {
                    let name = self.parameter_name(x);
                    let span = name.span;
                    self.plain_type(DataTypeKind::TypeOf(Box::new(name)), span)
                }
            },
        }
    }

    pub(super) fn atom_type(&self, atom: &sv::IntegerAtomType) -> DataType {
        self.plain_type(atom_kind(atom), self.span(atom))
    }

    pub(super) fn type_reference(&self, ty: &sv::TypeReference) -> DataType {
        let inner = match ty {
            sv::TypeReference::Expression(x) => self.expression(&x.nodes.1.nodes.1),
            sv::TypeReference::DataType(x) => self.name_or_type(self.data_type(&x.nodes.1.nodes.1)),
        };
        self.plain_type(DataTypeKind::TypeOf(Box::new(inner)), self.span(ty))
    }

    fn struct_union(&self, ty: &sv::DataTypeStructUnion, span: Span) -> DataType {
        let (keyword, packed, members, dims) = &ty.nodes;
        let (union, tagged) = match keyword {
            sv::StructUnion::Struct(_) => (false, false),
            sv::StructUnion::Union(_) => (true, false),
            sv::StructUnion::UnionTagged(_) => (true, true),
        };
        let signed = packed.as_ref().and_then(|(_, signing)| signing_of(signing));
        let (first, more) = &members.nodes.1;
        let members = std::iter::once(first).chain(more).flat_map(|member| self.members(member)).collect();
        let kind = DataTypeKind::Struct { union, packed: packed.is_some(), tagged, members };
        DataType { kind, packed: self.packed_dims(dims), signed, span }
    }

    fn members(&self, member: &sv::StructUnionMember) -> Vec<Member> {
        let (_, _, ty, names, _) = &member.nodes;
        let ty = self.data_type_or_void(ty);
        let declarators = self.variable_declarators(names);
        let member = |declarator: Declarator| Member {
            name: declarator.name,
            ty: ty.clone(),
            dims: declarator.dims,
            default: declarator.init,
        };
        declarators.into_iter().map(member).collect()
    }

    fn enumeration(&self, ty: &sv::DataTypeEnum, span: Span) -> DataType {
        let (_, base, members, dims) = &ty.nodes;
        let base = base.as_ref().map(|base| Box::new(self.enum_base(base)));
        let members = members.nodes.1.contents().into_iter().map(|member| self.enum_member(member)).collect();
        DataType { kind: DataTypeKind::Enum { base, members }, packed: self.packed_dims(dims), signed: None, span }
    }

    fn enum_base(&self, base: &sv::EnumBaseType) -> DataType {
        let span = self.span(base);
        match base {
            sv::EnumBaseType::Atom(x) => {
                let (atom, signing) = &x.nodes;
                DataType { kind: atom_kind(atom), packed: Vec::new(), signed: signing_of(signing), span }
            }
            sv::EnumBaseType::Vector(x) => {
                let (vector, signing, dim) = &x.nodes;
                let packed = dim.iter().map(|dim| self.packed_dim(dim)).collect();
                DataType { kind: vector_kind(vector), packed, signed: signing_of(signing), span }
            }
            sv::EnumBaseType::Type(x) => {
                let (name, dim) = &x.nodes;
                let packed = dim.iter().map(|dim| self.packed_dim(dim)).collect();
                DataType { packed, span, ..self.named_type(Scope::None, &name.nodes.0) }
            }
        }
    }

    fn enum_member(&self, member: &sv::EnumNameDeclaration) -> EnumMember {
        let (name, range, value) = &member.nodes;
        let range = range.as_ref().map(|range| {
            let (first, last) = &range.nodes.1;
            (self.integral(first), last.as_ref().map(|(_, last)| self.integral(last)))
        });
        let value = value.as_ref().map(|(_, value)| self.constant_expression(value));
        EnumMember { name: self.ident(&name.nodes.0), range, value }
    }
}

pub(super) fn signing_of(signing: &Option<sv::Signing>) -> Option<bool> {
    signing.as_ref().map(|signing| matches!(signing, sv::Signing::Signed(_)))
}

fn vector_kind(ty: &sv::IntegerVectorType) -> DataTypeKind {
    match ty {
        sv::IntegerVectorType::Bit(_) => DataTypeKind::Bit,
        sv::IntegerVectorType::Logic(_) | sv::IntegerVectorType::Reg(_) => DataTypeKind::Logic,
    }
}

fn atom_kind(ty: &sv::IntegerAtomType) -> DataTypeKind {
    match ty {
        sv::IntegerAtomType::Byte(_) => DataTypeKind::Byte,
        sv::IntegerAtomType::Shortint(_) => DataTypeKind::Shortint,
        sv::IntegerAtomType::Int(_) => DataTypeKind::Int,
        sv::IntegerAtomType::Longint(_) => DataTypeKind::Longint,
        sv::IntegerAtomType::Integer(_) => DataTypeKind::Integer,
        sv::IntegerAtomType::Time(_) => DataTypeKind::Time,
    }
}
