//! (room model)
