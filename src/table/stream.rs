//! Rows formatted on all cores and written in order, in constant memory.

use std::io::{self, Write};
use std::num::NonZero;
use std::ops::Range;
use std::sync::mpsc::{channel, sync_channel};
use std::thread;

/// Rows formatted into one buffer before it is handed on: some hundreds of kilobytes at
/// most, so that handing it on costs little beside making it.
const ROWS_PER_CHUNK: usize = 2048;
/// Below this the threads cost more than they save.
const ROWS_WORTH_THREADS: usize = 20_000;
/// Chunks a thread may be ahead of the writer.
const CHUNKS_AHEAD: usize = 2;

/// How many threads to format a table with.
pub(super) fn threads_for(rows: usize) -> usize {
    if rows < ROWS_WORTH_THREADS {
        return 1;
    }
    thread::available_parallelism().map_or(1, NonZero::get)
}

/// Calls `format` for consecutive ranges that cover `0..rows` and writes what it appends,
/// in order. With several threads, thread `t` takes every `threads`-th chunk from `t` on,
/// so the order in which buffers are awaited is known beforehand and no thread runs more
/// than a few chunks ahead.
pub(super) fn write_rows<F>(
    rows: usize,
    threads: usize,
    out: &mut dyn Write,
    format: F,
) -> io::Result<()>
where
    F: Fn(Range<usize>, &mut Vec<u8>) + Sync,
{
    let chunks = rows.div_ceil(ROWS_PER_CHUNK);
    let range = |chunk: usize| {
        let start = chunk * ROWS_PER_CHUNK;
        start..rows.min(start + ROWS_PER_CHUNK)
    };
    if threads <= 1 || chunks <= 1 {
        let mut buffer = Vec::new();
        for chunk in 0..chunks {
            buffer.clear();
            format(range(chunk), &mut buffer);
            out.write_all(&buffer)?;
        }
        return Ok(());
    }
    thread::scope(|scope| {
        let mut lanes = Vec::with_capacity(threads);
        for lane in 0..threads {
            let (full, filled) = sync_channel::<Vec<u8>>(CHUNKS_AHEAD);
            let (empty, emptied) = channel::<Vec<u8>>();
            let format = &format;
            thread::Builder::new().spawn_scoped(scope, move || {
                for chunk in (lane..chunks).step_by(threads) {
                    let mut buffer: Vec<u8> = emptied.try_recv().unwrap_or_default();
                    buffer.clear();
                    format(range(chunk), &mut buffer);
                    if full.send(buffer).is_err() {
                        // The writer gave up, and says why itself.
                        return;
                    }
                }
            })?;
            lanes.push((filled, empty));
        }
        for chunk in 0..chunks {
            let (filled, empty) = &lanes[chunk % threads];
            let Ok(buffer) = filled.recv() else {
                // The thread panicked, and the scope passes the panic on.
                break;
            };
            out.write_all(&buffer)?;
            // A lane that is done no longer wants its buffer back.
            let _ = empty.send(buffer);
        }
        Ok(())
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn lines(range: Range<usize>, out: &mut Vec<u8>) {
        for row in range {
            out.extend_from_slice(row.to_string().as_bytes());
            out.push(b'\n');
        }
    }

    #[test]
    fn threads_do_not_change_a_byte() {
        for rows in [0, 1, ROWS_PER_CHUNK, ROWS_PER_CHUNK + 1, 100_000] {
            let mut serial = Vec::new();
            write_rows(rows, 1, &mut serial, lines).expect("memory");
            for threads in [2, 3, 7] {
                let mut parallel = Vec::new();
                write_rows(rows, threads, &mut parallel, lines).expect("memory");
                assert!(serial == parallel, "{rows} rows on {threads} threads");
            }
        }
    }

    #[test]
    fn a_writer_that_fails_ends_the_threads() {
        struct Full;
        impl Write for Full {
            fn write(&mut self, _: &[u8]) -> io::Result<usize> {
                Err(io::Error::from(io::ErrorKind::BrokenPipe))
            }
            fn flush(&mut self) -> io::Result<()> {
                Ok(())
            }
        }
        let error = write_rows(1_000_000, 3, &mut Full, lines).expect_err("a closed pipe");
        assert_eq!(error.kind(), io::ErrorKind::BrokenPipe);
    }
}
