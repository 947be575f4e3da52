use super::{arguments::Look, problem::Problem, recording_file::RecordingSource};
use clockspar::{layout::Layout, run::recording::Reader};
pub fn run(_: Layout, _: &Look) -> Result<u8, Problem> {
    todo!()
}
pub fn replay(_: Reader<RecordingSource>, _: &str, _: &Look) -> Result<u8, Problem> {
    todo!()
}
