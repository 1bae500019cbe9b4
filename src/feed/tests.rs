use std::io::{BufRead, BufReader, Read, Write};
use std::os::unix::fs::PermissionsExt;
use std::os::unix::net::{UnixListener, UnixStream};
use std::path::PathBuf;
use std::time::{Duration, Instant};

use proptest::prelude::*;
use serde_json::Value;

use super::message::{Command, Event, Hello, Message};
use super::{ClientError, FeedClient, FeedError, FeedServer};

const SOON: Duration = Duration::from_secs(5);

fn examples() -> Vec<&'static str> {
    let lines = include_str!("FEED.md").lines();
    lines.filter(|line| line.starts_with("{\"type\"")).collect()
}

fn example(kind: &str) -> &'static str {
    let wanted = format!("{{\"type\":\"{kind}\"");
    examples().into_iter().find(|line| line.starts_with(&wanted)).unwrap()
}

fn hello() -> Hello {
    match serde_json::from_str(example("hello")).unwrap() {
        Message::Hello(hello) => hello,
        other => panic!("{other:?}"),
    }
}

fn event(text: &str) -> Message {
    let (kind, source, text) = ("note".into(), "test".into(), text.into());
    Message::Event(Event { host_ns: 1, kind, source, person: None, text })
}

struct Place {
    _dir: tempfile::TempDir,
    path: PathBuf,
}

fn place() -> Place {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("feed.sock");
    Place { _dir: dir, path }
}

fn keys(value: &Value, into: &mut Vec<String>) {
    match value {
        Value::Object(map) => map.iter().for_each(|(key, value)| {
            into.push(key.clone());
            keys(value, into);
        }),
        Value::Array(values) => values.iter().for_each(|value| keys(value, into)),
        _ => {}
    }
}

#[test]
fn every_example_in_the_document_is_a_whole_message() {
    for line in examples() {
        let as_message = serde_json::from_str::<Message>(line).map(|message| serde_json::to_value(message).unwrap());
        let as_command = serde_json::from_str::<Command>(line).map(|command| serde_json::to_value(command).unwrap());
        let again = as_message.or(as_command).unwrap_or_else(|error| panic!("{error}: {line}"));
        // Equal after a round trip: no field of the example is unknown, and none of the program's is left out.
        assert_eq!(again, serde_json::from_str::<Value>(line).unwrap(), "{line}");
    }
    let kinds = ["hello", "snapshot", "event", "dropped", "reply", "bye", "mark", "open", "close", "acknowledge"];
    assert!(kinds.iter().all(|kind| !example(kind).is_empty()));
}

#[test]
fn every_field_is_explained_in_the_document() {
    let text = include_str!("FEED.md");
    let mut all = Vec::new();
    examples().iter().for_each(|line| keys(&serde_json::from_str(line).unwrap(), &mut all));
    for key in all {
        assert!(text.contains(&format!("`{key}`")), "FEED.md does not explain {key}");
    }
}

#[test]
fn a_client_is_greeted_and_sees_what_is_published_in_order() {
    let place = place();
    let (server, _requests) = FeedServer::start(&place.path, hello()).unwrap();
    let mut client = FeedClient::connect(&place.path).unwrap();
    assert_eq!(client.hello(), &hello());
    for n in 0..50 {
        server.publish(&event(&n.to_string()));
    }
    for n in 0..50 {
        assert_eq!(client.next(SOON).unwrap(), Some(event(&n.to_string())));
    }
    assert_eq!(client.next(Duration::from_millis(20)).unwrap(), None);
    server.close("enough");
    assert_eq!(client.next(SOON).unwrap(), Some(Message::Bye { reason: "enough".into() }));
    assert!(matches!(client.next(SOON), Err(ClientError::HungUp)));
    assert!(!place.path.exists());
}

#[test]
fn the_socket_is_for_owner_and_group_only() {
    let place = place();
    let (_server, _requests) = FeedServer::start(&place.path, hello()).unwrap();
    assert_eq!(std::fs::metadata(&place.path).unwrap().permissions().mode() & 0o777, 0o660);
}

#[test]
fn a_socket_left_behind_is_replaced_and_a_living_one_is_not() {
    let place = place();
    drop(UnixListener::bind(&place.path).unwrap());
    assert!(place.path.exists(), "the kernel leaves the file");
    let (_server, _requests) = FeedServer::start(&place.path, hello()).unwrap();
    assert!(matches!(FeedServer::start(&place.path, hello()), Err(FeedError::InUse { .. })));
    FeedClient::connect(&place.path).unwrap();
}

#[test]
fn what_is_no_socket_is_never_removed() {
    let place = place();
    std::fs::write(&place.path, "notes").unwrap();
    assert!(matches!(FeedServer::start(&place.path, hello()), Err(FeedError::NotASocket { .. })));
    assert_eq!(std::fs::read_to_string(&place.path).unwrap(), "notes");
    let long = place.path.with_file_name("x".repeat(120));
    assert!(matches!(FeedServer::start(&long, hello()), Err(FeedError::PathTooLong { .. })));
}

#[test]
fn commands_reach_the_daemon_and_replies_their_client() {
    let place = place();
    let (_server, requests) = FeedServer::start(&place.path, hello()).unwrap();
    let mut client = FeedClient::connect(&place.path).unwrap();
    let mut bystander = FeedClient::connect(&place.path).unwrap();
    let daemon = std::thread::spawn(move || {
        let request = requests.recv_timeout(SOON).unwrap();
        let text = format!("noted for {}", request.command.person());
        request.replier.answer(true, text);
    });
    let mark = Command::Mark { id: 9, person: "duty recorder".into(), text: "gust".into() };
    assert_eq!(client.ask(&mark, SOON).unwrap(), (true, "noted for duty recorder".into()));
    daemon.join().unwrap();
    assert_eq!(bystander.next(Duration::from_millis(50)).unwrap(), None);
}

#[test]
fn commands_beyond_the_bound_are_refused_not_queued() {
    let place = place();
    let (_server, requests) = FeedServer::start(&place.path, hello()).unwrap();
    let mut client = FeedClient::connect(&place.path).unwrap();
    for id in 0..80 {
        client.send(&Command::Open { id, person: "winch".into(), back_s: None }).unwrap();
    }
    for id in 64..80 {
        match client.next(SOON).unwrap() {
            Some(Message::Reply { id: of, ok: false, text }) => {
                assert_eq!(of, id);
                assert!(text.contains("try again"), "{text}");
            }
            other => panic!("{other:?}"),
        }
    }
    assert_eq!(requests.len(), 64);
}

#[test]
fn a_client_that_stops_reading_is_told_what_it_missed_and_delays_nobody() {
    let place = place();
    let (server, _requests) = FeedServer::start(&place.path, hello()).unwrap();
    let mut slow = FeedClient::connect(&place.path).unwrap();
    let mut quick = FeedClient::connect(&place.path).unwrap();
    let snapshot: Message = serde_json::from_str(example("snapshot")).unwrap();
    let started = Instant::now();
    for n in 0..2_000 {
        server.publish(&snapshot);
        assert_eq!(quick.next(SOON).unwrap(), Some(snapshot.clone()), "{n}");
    }
    assert!(started.elapsed() < Duration::from_secs(2), "the slow client would have been cut");
    let (mut n_seen, mut n_dropped) = (0, 0);
    while let Some(message) = slow.next(Duration::from_millis(200)).unwrap() {
        match message {
            Message::Dropped { n } => n_dropped += n,
            _ => n_seen += 1,
        }
    }
    assert!(n_dropped > 0);
    assert_eq!(n_seen + n_dropped, 2_000);
    server.publish(&event("after"));
    assert_eq!(slow.next(SOON).unwrap(), Some(event("after")), "it goes on");
}

#[test]
fn a_client_that_takes_nothing_for_two_seconds_is_cut() {
    let place = place();
    let (server, _requests) = FeedServer::start(&place.path, hello()).unwrap();
    let _stuck = UnixStream::connect(&place.path).unwrap();
    let snapshot: Message = serde_json::from_str(example("snapshot")).unwrap();
    let started = Instant::now();
    while server.n_clients() == 0 {
        std::thread::sleep(Duration::from_millis(1));
    }
    for _ in 0..600 {
        server.publish(&snapshot);
    }
    while server.n_clients() > 0 {
        assert!(started.elapsed() < Duration::from_secs(6), "still connected");
        std::thread::sleep(Duration::from_millis(10));
    }
    assert!(started.elapsed() > Duration::from_millis(1_900), "cut after {:?}", started.elapsed());
}

#[test]
fn hostile_lines_are_answered_or_cut_and_the_next_client_is_served() {
    let place = place();
    let (server, requests) = FeedServer::start(&place.path, hello()).unwrap();
    let hostile: [&[u8]; 5] = [
        b"\n\n\n",
        b"not json\n",
        b"{\"type\":\"mark\",\"id\":5}\n",
        b"\xff\xfe\x00\n{\"type\":\"open\",\"id\":6,\"person\":\"x\",\"more\":1}\n",
        &[b'a'; 100_000],
    ];
    for bytes in hostile {
        let mut stream = UnixStream::connect(&place.path).unwrap();
        // The server may have cut us before we are through.
        let _ = stream.write_all(bytes);
        let _ = stream.shutdown(std::net::Shutdown::Write);
        stream.set_read_timeout(Some(SOON)).unwrap();
        let mut input = BufReader::new(stream);
        let mut line = String::new();
        input.read_line(&mut line).unwrap();
        assert!(line.starts_with("{\"type\":\"hello\""), "{line}");
        line.clear();
        input.read_line(&mut line).unwrap();
        assert!(line.contains("\"ok\":false") && line.contains("no command"), "{line}");
    }
    assert!(requests.is_empty());
    server.publish(&event("still here"));
    let mut client = FeedClient::connect(&place.path).unwrap();
    server.publish(&event("and for you"));
    assert_eq!(client.next(SOON).unwrap(), Some(event("and for you")));
}

#[test]
fn the_thirty_third_client_is_told_why_it_is_refused() {
    let place = place();
    let (server, _requests) = FeedServer::start(&place.path, hello()).unwrap();
    let clients: Vec<_> = (0..32).map(|_| FeedClient::connect(&place.path).unwrap()).collect();
    let refused = FeedClient::connect(&place.path);
    assert!(matches!(&refused, Err(ClientError::Refused { reason, .. }) if reason.contains("32")), "{refused:?}");
    drop(clients);
    let started = Instant::now();
    while server.n_clients() > 0 {
        assert!(started.elapsed() < SOON);
        server.publish(&event("knock"));
        std::thread::sleep(Duration::from_millis(5));
    }
    FeedClient::connect(&place.path).unwrap();
}

#[test]
fn a_later_daemons_unknown_messages_are_skipped_and_other_versions_refused() {
    let place = place();
    let listener = UnixListener::bind(&place.path).unwrap();
    let serve = |first: String| {
        let (mut stream, _) = listener.accept().unwrap();
        let rest =
            format!("{first}\n{{\"type\":\"weather\",\"wind_mps\":3}}\n{{\"type\":\"dropped\",\"n\":1,\"why\":2}}\n");
        stream.write_all(rest.as_bytes()).unwrap();
        let _ = stream.read(&mut [0]);
    };
    std::thread::scope(|scope| {
        let path = &place.path;
        let following = scope.spawn(move || {
            let mut client = FeedClient::connect(path).unwrap();
            assert_eq!(client.next(SOON).unwrap(), Some(Message::Dropped { n: 1 }));
        });
        serve(example("hello").to_owned());
        following.join().unwrap();
        let other = scope.spawn(move || FeedClient::connect(path).map(|_| ()));
        serve(example("hello").replace("\"feed_version\":1", "\"feed_version\":2"));
        assert!(matches!(other.join().unwrap(), Err(ClientError::OtherVersion { found: 2, .. })));
    });
}

#[test]
fn connecting_to_nobody_says_so() {
    let error = FeedClient::connect(&place().path).unwrap_err();
    assert!(error.to_string().contains("is the daemon running"), "{error}");
}

proptest! {
    #[test]
    fn any_person_and_text_travel_on_one_line(id in any::<u64>(), person in any::<String>(), text in any::<String>()) {
        let command = Command::Mark { id, person, text };
        let line = serde_json::to_string(&command).unwrap();
        prop_assert!(!line.contains('\n'));
        prop_assert_eq!(serde_json::from_str::<Command>(&line).unwrap(), command);
    }

    #[test]
    fn a_damaged_message_is_an_error_or_a_message_never_a_panic(at in 0_usize..600, byte in any::<u8>()) {
        let mut line = example("snapshot").as_bytes().to_vec();
        let at = at % line.len();
        line[at] = byte;
        let _ = serde_json::from_slice::<Message>(&line);
    }
}
