//! One particle in one dimension: pieces of potential and mass -> its lowest levels (Hz) and wave functions (1/sqrt(m)).
//!
//! `profile` how a quantity runs along x; `piece` a smooth stretch; `mesh` the elements; `lobatto` the nodes within one; `skyline` the
//! factor of the matrix; `krylov` its lowest vectors; `states` levels and functions on one mesh; `waves` both at two resolutions;
//! `eigenfunctions` their derivatives of any order.

mod eigenfunctions;
mod krylov;
mod lobatto;
mod mesh;
mod piece;
mod profile;
mod skyline;
mod states;
pub mod waves;

pub use eigenfunctions::Eigenfunctions;
pub use mesh::Mesh;
pub use piece::Piece;
pub use profile::Profile;
pub use states::{states, GridFault, States};
