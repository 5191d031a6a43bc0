//! # Noticing that a device came back, without looking again and again

use crate::meters::port::waited_for;
use rustix::fs::inotify;
use std::fs::File;
use std::io;
use std::mem::MaybeUninit;
use std::path::Path;
use tokio::io::Interest;
use tokio::io::unix::AsyncFd;

/// Watches the folder in which a device appears.
#[derive(Debug)]
pub(super) struct Hotplug(AsyncFd<File>);

impl Hotplug {
    /// For a device at this path; its nearest folder that exists is watched.
    pub(super) fn new(device: &Path) -> io::Result<Self> {
        let watch = inotify::init(inotify::CreateFlags::NONBLOCK | inotify::CreateFlags::CLOEXEC)?;
        let folder = device
            .ancestors()
            .skip(1)
            .find(|folder| folder.is_dir())
            .unwrap_or(Path::new("/dev"));
        let events = inotify::WatchFlags::CREATE
            | inotify::WatchFlags::MOVED_TO
            | inotify::WatchFlags::ATTRIB;
        inotify::add_watch(&watch, folder, events)?;
        Ok(Self(waited_for(File::from(watch), Interest::READABLE)?))
    }

    /// Waits until something appears there.
    pub(super) async fn appeared(&self) -> io::Result<()> {
        let mut space = [MaybeUninit::uninit(); 1024];
        self.0
            .async_io(Interest::READABLE, |watch| {
                inotify::Reader::new(watch, &mut space).next()?;
                Ok(())
            })
            .await
    }
}
