//! The five sockets: frames in to whoever handles them, frames out from whichever thread has something to say.

use std::sync::Arc;

use bytes::Bytes;
use tokio::sync::mpsc::{UnboundedReceiver, UnboundedSender, unbounded_channel};
use zeromq::{
    PubSocket, RouterRecvHalf, RouterSendHalf, RouterSocket, Socket, SocketRecv, SocketSend, ZmqMessage,
};

use super::connection::{Connection, Refusal};
use super::guard::Guards;
use super::log;
use super::message::{Request, Seal};

/// The channel that a request came by, and its reply leaves by.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Channel {
    Shell,
    Control,
}

/// Frames that leave; each queue keeps its order, and putting something in never waits.
#[derive(Clone)]
pub(super) struct Departures {
    pub(super) shell: UnboundedSender<Vec<Bytes>>,
    pub(super) control: UnboundedSender<Vec<Bytes>>,
    pub(super) iopub: UnboundedSender<Vec<Bytes>>,
}

/// Open all sockets, let frames leave, answer heartbeats, and give each request to `arrive`.
///
/// The guards must be kept for as long as the kernel listens.
pub(super) async fn open(
    connection: &Connection,
    seal: &Arc<Seal>,
    arrive: impl Fn(Channel, Request) + Clone + Send + 'static,
) -> Result<(Departures, Guards), Refusal> {
    let mut guards = Guards::new()?;
    let (shell_out, shell_in) = router(&mut guards, connection, &connection.shell).await?;
    let (control_out, control_in) = router(&mut guards, connection, &connection.control).await?;
    // What a front end answers to a question; none is asked.
    let (_, stdin_in) = router(&mut guards, connection, &connection.stdin).await?;
    let (heart_out, heart_in) = router(&mut guards, connection, &connection.heartbeat).await?;
    let mut iopub = PubSocket::new();
    guards.bind(&mut iopub, connection, &connection.iopub).await?;
    tokio::spawn(heartbeat(heart_out, heart_in));
    tokio::spawn(drain(stdin_in));
    let arrive_control = arrive.clone();
    tokio::spawn(receive(shell_in, seal.clone(), move |request| arrive(Channel::Shell, request)));
    tokio::spawn(receive(control_in, seal.clone(), move |request| arrive_control(Channel::Control, request)));
    let departures = Departures { shell: leave(shell_out), control: leave(control_out), iopub: leave(iopub) };
    Ok((departures, guards))
}

async fn router(
    guards: &mut Guards,
    connection: &Connection,
    place: &str,
) -> Result<(RouterSendHalf, RouterRecvHalf), Refusal> {
    let mut socket = RouterSocket::new();
    guards.bind(&mut socket, connection, place).await?;
    Ok(socket.split())
}

fn frames(message: Vec<Bytes>) -> Option<ZmqMessage> {
    ZmqMessage::try_from(message).ok()
}

fn leave(mut socket: impl SocketSend + Send + 'static) -> UnboundedSender<Vec<Bytes>> {
    let (sender, mut receiver): (_, UnboundedReceiver<Vec<Bytes>>) = unbounded_channel();
    tokio::spawn(async move {
        while let Some(message) = receiver.recv().await {
            // A front end that is gone gets nothing any more; the others do.
            if let Some(message) = frames(message)
                && let Err(error) = socket.send(message).await
            {
                log(&format!("a message was not sent: {error}"));
            }
        }
    });
    sender
}

async fn receive(mut socket: RouterRecvHalf, seal: Arc<Seal>, arrive: impl Fn(Request)) {
    loop {
        match socket.recv().await {
            Ok(message) => match seal.open(message.into_vec()) {
                Ok(request) => arrive(request),
                Err(why) => log(&format!("a message was refused: {why}")),
            },
            Err(error) => {
                log(&format!("nothing could be received: {error}"));
                tokio::time::sleep(std::time::Duration::from_millis(50)).await;
            }
        }
    }
}

async fn drain(mut socket: RouterRecvHalf) {
    while socket.recv().await.is_ok() {}
}

async fn heartbeat(mut out: RouterSendHalf, mut socket: RouterRecvHalf) {
    loop {
        match socket.recv().await {
            // One that asks and is gone is no reason to stop.
            Ok(message) => drop(out.send(message).await),
            Err(_) => tokio::time::sleep(std::time::Duration::from_millis(50)).await,
        }
    }
}
