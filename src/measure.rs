//! From audio to a measurement: joins [`crate::clicks`], [`crate::rhythm`] and [`crate::voltage`].
