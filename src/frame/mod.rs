//! Which picture a run is computed in: a `Problem` of the laboratory frame is rewritten into another, and a ledger says what was
//! kept and what was dropped. Nothing is integrated here, and nothing is dropped that is not in the ledger.
//!
//! `follow` finds how fast each level turns, `rotating` rewrites the problem, `jumps` what the surroundings do, `ledger` lists the
//! terms with their predicted cost, `eliminate` takes far levels out to second order.

pub mod eliminate;
pub mod follow;
pub mod jumps;
pub mod ledger;
pub mod rotating;
