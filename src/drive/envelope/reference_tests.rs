//! Areas of every shape against the numbers of an outside calculation.
