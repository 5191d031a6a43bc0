//! Cables that fall out and come back.

use crate::harness::{Peer, Running, line, meter, numbers, run, site, text};
use halfcell::config::site::{Protocol, Source};
use halfcell::daemon::line::FromLine;
use std::fs;
use std::os::unix::fs::symlink;
use std::path::Path;
use std::time::Duration;

const LIMIT: Duration = Duration::from_secs(5);

/// Lets `path` lead to the peer, as the system's device manager does.
fn plug(peer: &Peer, path: &Path) {
    let new = path.with_extension("new");
    symlink(&peer.path, &new).unwrap();
    fs::rename(&new, path).unwrap();
}

fn is_lost(told: &[FromLine]) -> usize {
    told.iter()
        .filter(|m| matches!(m, FromLine::Lost { .. }))
        .count()
}

fn is_back(told: &[FromLine]) -> usize {
    told.iter()
        .filter(|m| matches!(m, FromLine::Back { .. }))
        .count()
}

#[test]
fn a_cable_that_falls_out_and_comes_back_is_noted_and_the_other_line_never_notices() {
    run(async {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("adapter");
        let other = Peer::mute();
        let peer = Peer::mute();
        plug(&peer, &path);
        let source = || Source::Stream {
            text: text(r"(?<mv>\d+\.\d) mV"),
        };
        let lines = vec![
            line(&path, Protocol::Stream),
            line(&other.path, Protocol::Stream),
        ];
        let site = site(
            lines,
            vec![meter("a", 0, source()), meter("b", 1, source())],
        );
        let (mut running, mut undisturbed) = (Running::start(&site, 0), Running::start(&site, 1));
        peer.say("\r1.0 mV\r");
        other.say("\r1.0 mV\r");
        running
            .until("heard before", LIMIT, |t| numbers(t, 0).len() == 1)
            .await;
        undisturbed
            .until("heard before", LIMIT, |t| numbers(t, 1).len() == 1)
            .await;

        fs::remove_file(&path).unwrap();
        drop(peer);
        running.until("lost", LIMIT, |t| is_lost(t) == 1).await;
        for n in 2..12 {
            other.say(format!("{n}.0 mV\r"));
        }
        undisturbed
            .until("the other line goes on", LIMIT, |t| {
                numbers(t, 1).len() == 11
            })
            .await;

        let again = Peer::mute();
        plug(&again, &path);
        running.until("back", LIMIT, |t| is_back(t) == 1).await;
        again.say("\r2.0 mV\r");
        running
            .until("heard again", LIMIT, |t| numbers(t, 0).len() == 2)
            .await;

        let told = running.end().await;
        assert_eq!((is_lost(&told), is_back(&told)), (1, 1));
        let Some(FromLine::Counters { counters, .. }) = told.last() else {
            panic!("no counters at the end")
        };
        assert_eq!(counters.reopenings, 1);
        let undisturbed = undisturbed.end().await;
        assert_eq!((is_lost(&undisturbed), is_back(&undisturbed)), (0, 0));
    });
}

#[test]
fn a_device_that_is_absent_at_the_start_is_told_once_with_a_remedy_and_used_when_it_comes() {
    run(async {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("by-id/adapter");
        let source = Source::Stream {
            text: text(r"(?<mv>\d+\.\d) mV"),
        };
        let site = site(
            vec![line(&path, Protocol::Stream)],
            vec![meter("a", 0, source)],
        );
        let mut running = Running::start(&site, 0);
        running.until("lost", LIMIT, |t| is_lost(t) == 1).await;
        let Some(FromLine::Lost { cause, .. }) = running.told.first() else {
            panic!("{:?}", running.told)
        };
        assert_eq!(
            cause.replace(&path.display().to_string(), "/dev/x"),
            "line `stream-line`: there is no /dev/x; plug the adapter in, or set `device` to a path below /dev/serial/by-id"
        );
        let peer = Peer::mute();
        fs::create_dir(path.parent().unwrap()).unwrap();
        plug(&peer, &path);
        running.until("back", LIMIT, |t| is_back(t) == 1).await;
        let told = running.end().await;
        assert_eq!(is_lost(&told), 1);
    });
}
