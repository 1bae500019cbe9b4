//! Serves the feed: accepts clients, greets them, and gives each message to all of them without ever waiting.

use std::io;
use std::os::fd::AsFd;
use std::os::unix::net::{UnixListener, UnixStream};
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};
use std::thread::{self, JoinHandle};
use std::time::Duration;

use crossbeam_channel::{Receiver, Sender, bounded};
use rustix::event::{PollFd, PollFlags, poll};

use super::connection::{read_in, write_out};
use super::message::{Hello, Message};
use super::outbox::{Line, Outbox, Request};
use super::socket::{FeedError, bind};

const N_CLIENTS_MAX: usize = 32;
/// Commands that may wait for the daemon, of all clients together. When full, the client is told to try again.
const N_REQUESTS_MAX: usize = 64;
/// How long the last lines may take at the end.
const FAREWELL: Duration = Duration::from_millis(500);

#[derive(Debug)]
struct Client {
    outbox: Arc<Outbox>,
    stream: UnixStream,
    threads: [JoinHandle<()>; 2],
}

#[derive(Debug, Default)]
struct Clients(Mutex<Vec<Client>>);

impl Clients {
    fn lock(&self) -> MutexGuard<'_, Vec<Client>> {
        self.0.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

/// A feed that is being served. [`FeedServer::close`] says goodbye and waits for its threads; dropping it does the same.
#[derive(Debug)]
pub struct FeedServer {
    path: PathBuf,
    clients: Arc<Clients>,
    /// Dropping it wakes and ends the thread that accepts.
    wake: Option<UnixStream>,
    accepting: Option<JoinHandle<()>>,
}

impl FeedServer {
    /// Binds the socket and begins to accept; commands arrive at the receiver.
    ///
    /// # Errors
    /// [`FeedError`] when the socket cannot be had.
    pub fn start(path: &Path, hello: Hello) -> Result<(Self, Receiver<Request>), FeedError> {
        let io = |source| FeedError::Io { path: path.to_owned(), source };
        let listener = bind(path)?;
        listener.set_nonblocking(true).map_err(io)?;
        let (wake, woken) = UnixStream::pair().map_err(io)?;
        let (requests, inbox) = bounded(N_REQUESTS_MAX);
        let clients = Arc::new(Clients::default());
        let door = Door { listener, woken, clients: clients.clone(), requests, hello: Message::Hello(hello) };
        let accepting =
            thread::Builder::new().name("feed-accept".into()).spawn(move || door.accept_all()).map_err(io)?;
        Ok((Self { path: path.to_owned(), clients, wake: Some(wake), accepting: Some(accepting) }, inbox))
    }

    /// Gives the message to every client's outbox; never waits.
    pub fn publish(&self, message: &Message) {
        let clients = self.clients.lock();
        if clients.is_empty() {
            return;
        }
        let Some(line) = Line::of(message) else { return };
        for client in clients.iter() {
            client.outbox.push(line.clone());
        }
    }

    pub fn n_clients(&self) -> usize {
        self.clients.lock().iter().filter(|client| !client.outbox.is_closed()).count()
    }

    /// Says goodbye, lets the last lines go out, hangs up, waits for every thread and removes the socket.
    pub fn close(mut self, reason: &str) {
        self.stop(reason);
    }

    fn stop(&mut self, reason: &str) {
        let Some(wake) = self.wake.take() else { return };
        drop(wake);
        if let Some(accepting) = self.accepting.take() {
            // A panic there has been printed already, and nobody is left to accept.
            let _ = accepting.join();
        }
        self.publish(&Message::Bye { reason: reason.to_owned() });
        let clients = std::mem::take(&mut *self.clients.lock());
        for client in &clients {
            client.outbox.close();
        }
        for client in &clients {
            client.outbox.wait_empty(FAREWELL);
        }
        for client in clients {
            client.end();
        }
        // Somebody may have removed it before us.
        let _ = std::fs::remove_file(&self.path);
    }
}

impl Drop for FeedServer {
    fn drop(&mut self) {
        self.stop("the daemon stops");
    }
}

impl Client {
    fn new(stream: UnixStream, requests: Sender<Request>, hello: &Message) -> io::Result<Self> {
        stream.set_nonblocking(false)?;
        let outbox = Arc::new(Outbox::default());
        outbox.push(Line::of(hello).ok_or(io::ErrorKind::InvalidData)?);
        let writer = {
            let (stream, outbox) = (stream.try_clone()?, outbox.clone());
            thread::Builder::new().name("feed-write".into()).spawn(move || write_out(&stream, &outbox))?
        };
        let reader = {
            let (stream, outbox) = (stream.try_clone()?, outbox.clone());
            thread::Builder::new().name("feed-read".into()).spawn(move || read_in(&stream, &outbox, &requests))
        };
        match reader {
            Ok(reader) => Ok(Self { outbox, stream, threads: [writer, reader] }),
            Err(error) => {
                outbox.abandon();
                Err(error)
            }
        }
    }

    fn is_over(&self) -> bool {
        self.threads.iter().all(JoinHandle::is_finished)
    }

    fn end(self) {
        self.outbox.abandon();
        // Both threads may wait on the socket; if it is gone, they do not.
        let _ = self.stream.shutdown(std::net::Shutdown::Both);
        for thread in self.threads {
            let _ = thread.join();
        }
    }
}

/// The thread that accepts.
struct Door {
    listener: UnixListener,
    woken: UnixStream,
    clients: Arc<Clients>,
    requests: Sender<Request>,
    hello: Message,
}

impl Door {
    fn accept_all(self) {
        loop {
            let mut waiting = [
                PollFd::new(&self.listener, PollFlags::IN),
                PollFd::from_borrowed_fd(self.woken.as_fd(), PollFlags::IN),
            ];
            let polled = poll(&mut waiting, None);
            if polled.is_err_and(|error| error != rustix::io::Errno::INTR) || !waiting[1].revents().is_empty() {
                return;
            }
            if !waiting[0].revents().is_empty() {
                self.accept_one();
            }
        }
    }

    fn accept_one(&self) {
        let Ok((stream, _)) = self.listener.accept() else {
            // Out of descriptors, most likely: do not spin on a listener that stays ready.
            thread::sleep(Duration::from_millis(100));
            return;
        };
        let mut clients = self.clients.lock();
        let over: Vec<_> = clients.extract_if(.., |client| client.is_over()).collect();
        if clients.len() >= N_CLIENTS_MAX {
            refuse(&stream);
        } else if let Ok(client) = Client::new(stream, self.requests.clone(), &self.hello) {
            clients.push(client);
        }
        drop(clients);
        over.into_iter().for_each(Client::end);
    }
}

fn refuse(mut stream: &UnixStream) {
    let reason = format!("{N_CLIENTS_MAX} clients are connected already, no more are taken");
    if let Some(line) = Line::of(&Message::Bye { reason }) {
        // A fresh socket has room for one line; a client that is gone needs no reason.
        let _ = stream.set_nonblocking(true);
        let _ = io::Write::write(&mut stream, line.text.as_bytes());
    }
}
