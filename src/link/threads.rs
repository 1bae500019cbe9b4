//! The links' thread: all ports on one current-thread runtime, with nothing else on it.

use std::io;
use std::sync::Arc;
use std::thread::JoinHandle;
use std::time::Duration;

use tokio::runtime::Builder;
use tokio::sync::watch;
use tokio::task::JoinSet;
use tokio::time::{MissedTickBehavior, interval};

use super::sinks::{Outlet, Sinks};
use super::task::{PortSpec, PortTask};
use super::{DeviceIdx, HostClock};

const HEARTBEAT: Duration = Duration::from_millis(20);

/// The running thread. Dropping it without [`Links::stop`] stops it as well, without waiting.
#[derive(Debug)]
pub struct Links {
    stop: watch::Sender<bool>,
    thread: JoinHandle<io::Result<()>>,
}

/// How the links' thread ended badly.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum LinksError {
    #[error("cannot start the links' thread: {0}")]
    Start(#[from] io::Error),
    #[error("the links' thread panicked; this is a fault of the program")]
    Panicked,
}

/// Starts reading all `ports`. `seed` sets tokens and dither of time requests.
pub fn spawn_links(ports: Vec<PortSpec>, sinks: Sinks, clock: Arc<dyn HostClock>, seed: u64) -> io::Result<Links> {
    let (stop, stopped) = watch::channel(false);
    let thread = std::thread::Builder::new().name("links".to_owned()).spawn(move || {
        let runtime = Builder::new_current_thread().enable_all().build()?;
        runtime.block_on(run(ports, sinks, clock, seed, stopped));
        Ok(())
    })?;
    Ok(Links { stop, thread })
}

impl Links {
    /// Stops the ports in order: what is readable is read and handed on, then the queues close behind it.
    pub fn stop(self) -> Result<(), LinksError> {
        self.stop.send_replace(true);
        self.thread.join().map_err(|_| LinksError::Panicked)?.map_err(LinksError::Start)
    }

    /// True while the thread runs; it ends by itself only when it could not start or panicked.
    pub fn is_running(&self) -> bool {
        !self.thread.is_finished()
    }
}

async fn run(ports: Vec<PortSpec>, sinks: Sinks, clock: Arc<dyn HostClock>, seed: u64, stopped: watch::Receiver<bool>) {
    let mut tasks = JoinSet::new();
    let n_ports = ports.len();
    for spec in ports {
        let task = PortTask {
            seed: seed ^ (u64::from(spec.device.0) << 32),
            outlet: Outlet::new(spec.device, sinks.clone()),
            clock: Arc::clone(&clock),
            stop: stopped.clone(),
            spec,
        };
        tasks.spawn(task.run());
    }
    let heartbeat = Outlet::new(DeviceIdx(0), sinks);
    tasks.spawn(beat(heartbeat, clock, stopped));
    // Company on this thread would delay reading.
    debug_assert_eq!(tokio::runtime::Handle::current().metrics().num_alive_tasks(), n_ports + 1);
    while tasks.join_next().await.is_some() {}
}

async fn beat(mut outlet: Outlet, clock: Arc<dyn HostClock>, mut stop: watch::Receiver<bool>) {
    let mut ticks = interval(HEARTBEAT);
    ticks.set_missed_tick_behavior(MissedTickBehavior::Skip);
    loop {
        tokio::select! {
            _ = ticks.tick() => outlet.heartbeat(clock.monotonic_ns()),
            _ = stop.changed() => return,
        }
    }
}
