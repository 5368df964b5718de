//! One command with bounds: how long it may run, and how much of what it says is kept.

use std::collections::VecDeque;
use std::ffi::OsString;
use std::io::{self, Read};
use std::path::Path;
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, PoisonError};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

/// Bytes of standard output, and of standard error, that are kept.
pub(super) const MOST_KEPT: usize = 1 << 20;
/// Longest pause between two looks at a command.
const PAUSE: Duration = Duration::from_millis(20);
/// How long what a command has left running may hold its output open.
const GRACE: Duration = Duration::from_secs(1);

/// How a command came to its end.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum End {
    /// By itself, or by a signal of somebody else.
    Ended(ExitStatus),
    /// It was still running at the time limit.
    TimeLimit,
    /// The user has stopped the whole.
    Stopped,
}

/// The last part of a stream.
#[derive(Clone, Debug, Default)]
pub(super) struct Kept {
    bytes: VecDeque<u8>,
    /// Bytes before it that were dropped.
    cut: u64,
}

/// A command that is over.
pub(super) struct Finished {
    pub end: End,
    pub output: Kept,
    pub errors: Kept,
}

impl Kept {
    fn add(&mut self, chunk: &[u8]) {
        self.bytes.extend(chunk);
        let over = self.bytes.len().saturating_sub(MOST_KEPT);
        self.bytes.drain(..over);
        self.cut += over as u64;
    }

    /// For a file: what was kept, and what was not.
    pub fn to_file(&self) -> Vec<u8> {
        let mut file = Vec::with_capacity(self.bytes.len() + 100);
        if self.cut > 0 {
            let text = format!("[stepgauge: the first {} bytes were cut]\n", self.cut);
            file.extend(text.into_bytes());
        }
        let (first, second) = self.bytes.as_slices();
        file.extend_from_slice(first);
        file.extend_from_slice(second);
        file
    }

    /// The last lines that are not blank, first to last.
    pub fn last_lines(&self, most: usize) -> Vec<String> {
        // Far more than the lines that are shown can need.
        let enough = self.bytes.len().saturating_sub(1 << 16);
        let bytes: Vec<u8> = self.bytes.range(enough..).copied().collect();
        let text = String::from_utf8_lossy(&bytes);
        let lines = text.split(['\n', '\r']).rev();
        let full = lines.filter(|line| !line.trim().is_empty()).take(most);
        let mut lines: Vec<String> = full.map(|line| line.trim_end().to_owned()).collect();
        lines.reverse();
        lines
    }
}

/// Runs a command to its end in a folder. Whatever it has started in its own group ends
/// with it.
///
/// # Errors
/// A command that cannot be started or waited for.
pub(super) fn run(
    words: &[OsString],
    folder: &Path,
    limit: Duration,
    stop: &AtomicBool,
) -> io::Result<Finished> {
    let (program, arguments) = words
        .split_first()
        .ok_or_else(|| io::Error::from(io::ErrorKind::InvalidInput))?;
    let mut command = Command::new(program);
    command.args(arguments).current_dir(folder);
    command.stdin(Stdio::null());
    command.stdout(Stdio::piped()).stderr(Stdio::piped());
    #[cfg(unix)]
    std::os::unix::process::CommandExt::process_group(&mut command, 0);
    let mut child = command.spawn()?;
    let readers = [listen(child.stdout.take()), listen(child.stderr.take())];
    let end = wait(&mut child, limit, stop);
    // Nothing of the group stays behind, however the command has ended or waiting has failed;
    // until the command is asked for its status, its number is nobody else's.
    end_group(&child);
    let _ = child.kill();
    let status = child.wait();
    let end = match end {
        Ok(None) => status.map(End::Ended),
        Ok(Some(end)) => Ok(end),
        Err(error) => Err(error),
    };
    // Whoever holds the pipes has left the group: it is not waited for.
    silent_within(&readers, GRACE);
    let [output, errors] = readers.map(|(kept, _)| {
        let mut kept = kept.lock().unwrap_or_else(PoisonError::into_inner);
        std::mem::take(&mut *kept)
    });
    Ok(Finished {
        end: end?,
        output,
        errors,
    })
}

/// Waits for the end of a command; `None` where it has ended by itself.
fn wait(child: &mut Child, limit: Duration, stop: &AtomicBool) -> io::Result<Option<End>> {
    let began = Instant::now();
    let mut pause = Duration::from_millis(1);
    loop {
        if has_ended(child)? {
            return Ok(None);
        }
        if stop.load(Ordering::Relaxed) {
            return Ok(Some(End::Stopped));
        }
        let left = limit.saturating_sub(began.elapsed());
        if left.is_zero() {
            return Ok(Some(End::TimeLimit));
        }
        std::thread::sleep(pause.min(left));
        pause = (2 * pause).min(PAUSE);
    }
}

/// True for a command that has ended, which is left unasked for its status.
#[cfg(unix)]
fn has_ended(child: &mut Child) -> io::Result<bool> {
    use nix::sys::wait::{Id, WaitPidFlag, WaitStatus, waitid};
    let number = i32::try_from(child.id()).map_err(io::Error::other)?;
    let look = WaitPidFlag::WEXITED | WaitPidFlag::WNOHANG | WaitPidFlag::WNOWAIT;
    let seen = waitid(Id::Pid(nix::unistd::Pid::from_raw(number)), look)?;
    Ok(seen != WaitStatus::StillAlive)
}

#[cfg(not(unix))]
fn has_ended(child: &mut Child) -> io::Result<bool> {
    Ok(child.try_wait()?.is_some())
}

type Listening = (Arc<Mutex<Kept>>, Option<JoinHandle<()>>);

/// Reads a stream to its end, so that whoever writes is never held up.
fn listen(stream: Option<impl Read + Send + 'static>) -> Listening {
    let kept = Arc::new(Mutex::new(Kept::default()));
    let shared = Arc::clone(&kept);
    let reader = stream.map(|mut stream| {
        std::thread::spawn(move || {
            let mut chunk = [0; 1 << 13];
            loop {
                match stream.read(&mut chunk) {
                    Ok(0) => break,
                    Ok(count) => {
                        let mut kept = shared.lock().unwrap_or_else(PoisonError::into_inner);
                        kept.add(&chunk[..count]);
                    }
                    Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
                    Err(_) => break,
                }
            }
        })
    });
    (kept, reader)
}

fn silent_within(readers: &[Listening], grace: Duration) -> bool {
    let until = Instant::now() + grace;
    let done = || {
        let mut readers = readers.iter().filter_map(|(_, reader)| reader.as_ref());
        readers.all(JoinHandle::is_finished)
    };
    while !done() {
        if Instant::now() >= until {
            return false;
        }
        std::thread::sleep(Duration::from_millis(2));
    }
    true
}

/// Ends the command with everything it has started in its group, which has the number of
/// the command.
#[cfg(unix)]
fn end_group(child: &Child) {
    use nix::sys::signal::{Signal, killpg};
    if let Ok(number) = i32::try_from(child.id()) {
        // A group that is gone already is as good.
        let _ = killpg(nix::unistd::Pid::from_raw(number), Signal::SIGKILL);
    }
}

#[cfg(not(unix))]
fn end_group(_: &Child) {}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_last_part_is_kept() {
        let mut kept = Kept::default();
        kept.add(b"first\n");
        kept.add(&vec![b'x'; MOST_KEPT - 5]);
        kept.add(b"\nlast line  \r\n\n");
        assert_eq!(kept.bytes.len(), MOST_KEPT);
        assert_eq!(kept.last_lines(1), ["last line"]);
        let file = String::from_utf8(kept.to_file()).unwrap();
        assert!(
            file.starts_with("[stepgauge: the first 16 bytes were cut]\nxxx"),
            "{}",
            &file[..60]
        );
    }
}
