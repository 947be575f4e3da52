//! stub
/// stub
pub struct Extreme;
/// stub
pub struct Extremes;
/// stub
pub struct Range;
