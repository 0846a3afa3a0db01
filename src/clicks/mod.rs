//! (room clicks)
