//! Serial ports: one reader thread each, which stamps, sends, and looks again for a port that was lost.

use super::Trouble;
use super::clock::StreamClock;
use super::engine::Arrival;
use crate::config::{Port, UsbId};
use serialport::{ErrorKind, SerialPort, SerialPortInfo, SerialPortType};
use std::io::{self, Read};
use std::time::{Duration, Instant};

/// A read gives up after this and looks whether it should stop.
const READ_TIMEOUT: Duration = Duration::from_millis(100);
/// Time between two attempts to find a lost port again.
const RETRY: Duration = Duration::from_millis(250);
/// Reads of nothing at once (not after the timeout) that mean the port is gone.
const EMPTY_READS: u32 = 20;

/// A read that lasts so long was none: this program, or the computer, slept.
const SLEPT_US: i64 = 5_000_000;

/// An open port, and how to find it again.
pub struct Reader {
    index: usize,
    port: Port,
    open: Box<dyn SerialPort>,
}

/// The ports that the system lists.
pub fn listed() -> Vec<SerialPortInfo> {
    serialport::available_ports().unwrap_or_default()
}

/// The device path of a port now: by USB identity among `listed`, else as the rig says.
pub fn device_of(port: &Port, listed: &[SerialPortInfo]) -> Option<String> {
    match &port.usb {
        Some(id) => listed.iter().find(|p| is(p, id)).map(|p| p.port_name.clone()),
        None => port.device.clone(),
    }
}

fn is(listed: &SerialPortInfo, id: &UsbId) -> bool {
    let SerialPortType::UsbPort(usb) = &listed.port_type else { return false };
    let serial = id.serial.as_ref().is_none_or(|s| usb.serial_number.as_ref() == Some(s));
    (usb.vid, usb.pid) == (id.vid, id.pid) && serial
}

/// Opens a port of the rig.
///
/// # Errors
/// [`Trouble`] with the remedy: missing, busy, no rights, no serial port.
pub fn open(index: usize, port: &Port) -> Result<Reader, Trouble> {
    let place = || format!("port {}", port.name);
    let device = device_of(port, &listed()).ok_or_else(|| {
        Trouble::new("no device with the port's usb identity is plugged in")
            .at(place())
            .hint("plug it in; `steadytap listen` shows what is there")
    })?;
    let builder = serialport::new(&device, port.baud).timeout(READ_TIMEOUT).dtr_on_open(port.dtr);
    let open = builder.open().map_err(|e| explain(&e, &device).at(format!("{}, {device}", place())))?;
    Ok(Reader { index, port: port.clone(), open })
}

fn explain(error: &serialport::Error, device: &str) -> Trouble {
    let exists = std::fs::metadata(device).is_ok();
    match error.kind() {
        ErrorKind::Io(io::ErrorKind::PermissionDenied) => Trouble::new("no right to open the port").hint(
            "add yourself to the group that owns it (usually `sudo usermod -aG dialout $USER`), then log in again",
        ),
        _ if !exists => Trouble::new("there is no such port")
            .hint("plug it in, or correct the rig; `steadytap listen` shows what is there"),
        ErrorKind::NoDevice => {
            Trouble::new(format!("the port is busy: {error}")).hint("close the other program that has it open")
        }
        _ => Trouble::new(format!("this is no serial port that can be opened: {error}"))
            .hint("correct `device` in the rig; `steadytap listen` shows what is there"),
    }
}

impl Reader {
    /// The open port alone.
    pub fn into_port(self) -> Box<dyn SerialPort> {
        self.open
    }

    /// Reads until `send` says stop.
    pub fn run(mut self, clock: StreamClock, mut send: impl FnMut(Arrival) -> bool) {
        let port = self.index;
        let mut buffer = vec![0; 16 * 1024];
        loop {
            if !self.read_until_lost(&mut buffer, clock, &mut send) {
                return;
            }
            if !send(Arrival::Port { port, at: clock.now(), word: "lost".to_string() }) {
                return;
            }
            drop(self.open);
            self.open = loop {
                std::thread::sleep(RETRY);
                match open(port, &self.port) {
                    Ok(reader) => break reader.open,
                    // An empty read asks whether anybody still listens.
                    Err(_) if !send(Arrival::Bytes { port, at: clock.now(), bytes: Vec::new() }) => return,
                    Err(_) => {}
                }
            };
            if !send(Arrival::Port { port, at: clock.now(), word: "found".to_string() }) {
                return;
            }
        }
    }

    /// True when the port was lost, false when nobody listens any more.
    fn read_until_lost(
        &mut self,
        buffer: &mut [u8],
        clock: StreamClock,
        send: &mut impl FnMut(Arrival) -> bool,
    ) -> bool {
        let mut empty = 0;
        loop {
            let (before, began) = (Instant::now(), clock.now());
            let bytes = match self.open.read(buffer) {
                Ok(0) if before.elapsed() >= READ_TIMEOUT / 2 => Vec::new(),
                Ok(0) => {
                    empty += 1;
                    if empty >= EMPTY_READS {
                        return true;
                    }
                    Vec::new()
                }
                Ok(n) => {
                    empty = 0;
                    buffer[..n].to_vec()
                }
                Err(e) => match e.kind() {
                    io::ErrorKind::TimedOut | io::ErrorKind::Interrupted | io::ErrorKind::WouldBlock => Vec::new(),
                    _ => return true,
                },
            };
            let (port, at) = (self.index, clock.now());
            let slept = at.since(began) >= SLEPT_US;
            if slept && !send(Arrival::Port { port, at, word: "suspended".to_string() })
                || !send(Arrival::Bytes { port, at, bytes })
            {
                return false;
            }
        }
    }
}
