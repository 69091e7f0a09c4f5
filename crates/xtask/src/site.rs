//! A small static server of one folder, on this machine alone.

use std::io::{BufRead, BufReader, Write};
use std::net::{TcpListener, TcpStream};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

/// A server that runs until the process ends, and can be switched off.
pub struct Site {
    /// Where it is.
    pub address: String,
    up: Arc<AtomicBool>,
}

impl Site {
    /// Serves the files of `folder` on `port` of this machine, or on any where that one is
    /// taken.
    ///
    /// # Errors
    /// Where no port can be had.
    pub fn of(folder: PathBuf, port: u16) -> std::io::Result<Self> {
        let listener =
            TcpListener::bind(("127.0.0.1", port)).or_else(|_| TcpListener::bind("127.0.0.1:0"))?;
        let address = format!("http://{}/", listener.local_addr()?);
        let up = Arc::new(AtomicBool::new(true));
        let serving = Arc::clone(&up);
        std::thread::spawn(move || {
            for stream in listener.incoming().flatten() {
                if serving.load(Ordering::SeqCst) {
                    let folder = folder.clone();
                    std::thread::spawn(move || answer(stream, &folder));
                }
            }
        });
        Ok(Self { address, up })
    }

    /// Closes every further connection unanswered, as a network that is gone.
    pub fn go_offline(&self) {
        self.up.store(false, Ordering::SeqCst);
    }
}

fn answer(mut stream: TcpStream, folder: &Path) {
    let mut request = String::new();
    let mut reader = BufReader::new(&stream);
    if reader.read_line(&mut request).is_err() {
        return;
    }
    let mut header = String::new();
    while reader.read_line(&mut header).is_ok_and(|n| n > 2) {
        header.clear();
    }
    let path = request
        .split_whitespace()
        .nth(1)
        .unwrap_or("/")
        .split(['?', '#'])
        .next()
        .unwrap_or("/");
    let name = path.trim_start_matches('/');
    let name = if name.is_empty() { "index.html" } else { name };
    // Every file of the page lies in one folder: a name with a separator is none of them.
    let body = if name.contains(['/', '\\']) {
        None
    } else {
        std::fs::read(folder.join(name)).ok()
    };
    let (status, kind, body) = match body {
        Some(body) => ("200 OK", mime(name), body),
        None => ("404 Not Found", "text/plain", b"not here".to_vec()),
    };
    let head = format!(
        "HTTP/1.1 {status}\r\nContent-Type: {kind}\r\nContent-Length: {}\r\nCache-Control: no-cache\r\nConnection: close\r\n\r\n",
        body.len()
    );
    // A browser that has gone away is no fault of the server's.
    let _ = stream
        .write_all(head.as_bytes())
        .and_then(|()| stream.write_all(&body));
}

fn mime(name: &str) -> &'static str {
    match name.rsplit('.').next().unwrap_or("") {
        "html" => "text/html; charset=utf-8",
        "js" => "text/javascript",
        "css" => "text/css",
        "wasm" => "application/wasm",
        "svg" => "image/svg+xml",
        "webmanifest" => "application/manifest+json",
        _ => "application/octet-stream",
    }
}
