//! (room audio)
