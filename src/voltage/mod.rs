//! (room voltage)
