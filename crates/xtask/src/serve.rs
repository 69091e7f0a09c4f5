//! A small static server of dist/ on this machine alone.

use crate::{Outcome, setup};
use std::io::{BufRead, BufReader, Write};
use std::net::{TcpListener, TcpStream};
use std::path::Path;

/// Serves dist/ until interrupted and prints the address.
pub(crate) fn forever() -> Outcome {
    let listener = TcpListener::bind("127.0.0.1:8460")
        .or_else(|_| TcpListener::bind("127.0.0.1:0"))
        .map_err(|e| format!("no port to serve on: {e}"))?;
    let address = listener.local_addr().map_err(|e| e.to_string())?;
    println!("Evenfall is at http://{address}/  (Ctrl-C ends it)");
    let dist = setup::root().join("dist");
    for stream in listener.incoming().flatten() {
        let dist = dist.clone();
        std::thread::spawn(move || answer(stream, &dist));
    }
    Ok(())
}

fn answer(mut stream: TcpStream, dist: &Path) {
    let mut line = String::new();
    let mut reader = BufReader::new(&stream);
    if reader.read_line(&mut line).is_err() {
        return;
    }
    let mut header = String::new();
    while reader.read_line(&mut header).is_ok_and(|n| n > 2) {
        header.clear();
    }
    let path = line
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
        std::fs::read(dist.join(name)).ok()
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
