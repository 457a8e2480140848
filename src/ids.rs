//! Typed ids. Every kind of entity has its own `u32` newtype, so that a node can never be used as an instance; the
//! value is stored with an offset of one so that `Option<Id>` costs nothing. `Display` prints the name used in dumps
//! (`n12`, `i3`).

/// Declares an id type: `define_id!(NodeId, "n", "A node of the gate graph.")`.
#[macro_export]
macro_rules! define_id {
    ($name:ident, $prefix:literal, $doc:literal) => {
        #[doc = $doc]
        #[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, serde::Serialize, serde::Deserialize)]
        pub struct $name(std::num::NonZeroU32);

        impl $name {
            /// The id of the entity at position `index` (0-based) of its arena.
            ///
            /// # Panics
            /// Past `u32::MAX - 1` entities.
            pub fn new(index: usize) -> Self {
                let raw = u32::try_from(index + 1).ok().and_then(std::num::NonZeroU32::new);
                match raw {
                    Some(raw) => Self(raw),
                    None => panic!("more than 2^32 entities"),
                }
            }

            /// The position in the arena.
            pub fn index(self) -> usize {
                self.0.get() as usize - 1
            }
        }

        impl std::fmt::Display for $name {
            fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
                write!(f, concat!($prefix, "{}"), self.index())
            }
        }

        impl std::fmt::Debug for $name {
            fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
                std::fmt::Display::fmt(self, f)
            }
        }
    };
}
