//! What the browser tests stand on: a server of dist/ and a small WebDriver client (W3C
//! WebDriver over plain HTTP).

use evenfall_engine::design::Design;
use evenfall_engine::exchange::link;
use serde_json::{Value, json};
use std::io::{BufRead, BufReader, Read, Write};
use std::net::TcpStream;
use std::os::unix::process::CommandExt;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};
pub use xtask::site::Site;

/// The folder of the finished page.
pub fn dist() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("../../dist")
}

/// True once the page shows an answer.
pub const READY: &str = "return !!document.querySelector('[data-test=\"figure-output_power_w\"]')";

/// A server of the finished page.
pub fn page() -> Site {
    Site::of(dist(), 0).expect("a port")
}

/// A browser with a fresh profile.
pub struct Browser {
    driver: Child,
    port: u16,
    session: String,
    profile: PathBuf,
}

impl Browser {
    /// Starts ChromeDriver and a headless Chromium.
    pub fn start(name: &str) -> Self {
        Self::start_with(name, &json!({}))
    }

    /// The same in a browser that lets no page store anything.
    pub fn start_without_storage(name: &str) -> Self {
        Self::start_with(
            name,
            &json!({"profile.default_content_setting_values.cookies": 2}),
        )
    }

    fn start_with(name: &str, settings: &Value) -> Self {
        let profile = std::env::temp_dir().join(format!("evenfall-{}-{name}", std::process::id()));
        let mut driver = Command::new("/usr/bin/chromedriver")
            .arg("--port=0")
            .stdout(Stdio::piped())
            .stderr(Stdio::null())
            .process_group(0)
            .spawn()
            .expect("ChromeDriver in /usr/bin");
        let mut lines = BufReader::new(driver.stdout.take().expect("its output")).lines();
        let port = loop {
            let line = lines
                .next()
                .expect("ChromeDriver names its port")
                .expect("text");
            if let Some((_, rest)) = line.split_once("successfully on port ") {
                break rest.trim_end_matches('.').parse().expect("a port");
            }
        };
        std::thread::spawn(move || lines.for_each(drop));
        let mut browser = Self {
            driver,
            port,
            session: String::new(),
            profile,
        };
        let arguments = [
            "--headless=new",
            "--no-sandbox",
            "--disable-gpu",
            "--disable-quic",
            "--no-first-run",
            "--disable-background-networking",
            "--disable-component-update",
            "--disable-sync",
            "--disable-dev-shm-usage",
            "--window-size=1280,1000",
            &format!("--user-data-dir={}", browser.profile.display()),
        ];
        let answer = browser.call(
            "POST",
            "/session",
            &json!({"capabilities": {"alwaysMatch": {
                "goog:chromeOptions": {"args": arguments, "prefs": settings},
                "goog:loggingPrefs": {"browser": "ALL"}
            }}}),
        );
        browser.session = answer["sessionId"].as_str().expect("a session").to_owned();
        browser
    }

    fn call(&self, method: &str, path: &str, body: &Value) -> Value {
        let mut stream = TcpStream::connect(("127.0.0.1", self.port)).expect("ChromeDriver");
        let body = if method == "GET" {
            String::new()
        } else {
            body.to_string()
        };
        write!(
            stream,
            "{method} {path} HTTP/1.1\r\nHost: 127.0.0.1:{}\r\nContent-Type: application/json\r\nContent-Length: {}\r\nConnection: close\r\n\r\n{body}",
            self.port,
            body.len()
        )
        .expect("a request");
        // ChromeDriver keeps the connection open: the length says where the answer ends.
        let mut reader = BufReader::new(stream);
        let (mut line, mut length) = (String::new(), 0);
        while reader.read_line(&mut line).expect("a header") > 2 {
            if let Some((name, value)) = line.split_once(':')
                && name.eq_ignore_ascii_case("content-length")
            {
                length = value.trim().parse().expect("a length");
            }
            line.clear();
        }
        let mut answer = vec![0; length];
        reader.read_exact(&mut answer).expect("an answer");
        let body = String::from_utf8_lossy(&answer).into_owned();
        let value: Value = serde_json::from_str(&body).unwrap_or_else(|e| panic!("{e}: {body}"));
        assert!(
            value["value"]["error"].is_null(),
            "{method} {path}: {}",
            value["value"]
        );
        value["value"].clone()
    }

    fn command(&self, path: &str, body: &Value) -> Value {
        self.call("POST", &format!("/session/{}/{path}", self.session), body)
    }

    /// Opens an address.
    pub fn open(&self, address: &str) {
        self.command("url", &json!({ "url": address }));
    }

    /// Runs a script and gives its result.
    pub fn script(&self, script: &str) -> Value {
        self.command("execute/sync", &json!({ "script": script, "args": [] }))
    }

    /// Waits until a script's result is true.
    #[track_caller]
    pub fn wait(&self, what: &str, script: &str) {
        let start = Instant::now();
        while self.script(script) != json!(true) {
            assert!(
                start.elapsed() < Duration::from_secs(20),
                "waited in vain for {what}"
            );
            std::thread::sleep(Duration::from_millis(30));
        }
    }

    /// Text of the element that a test id names.
    pub fn text(&self, test: &str) -> String {
        let script =
            format!("return document.querySelector('[data-test=\"{test}\"]')?.textContent ?? ''");
        self.script(&script).as_str().unwrap_or_default().to_owned()
    }

    /// Sends keys to an element.
    pub fn send_keys(&self, test: &str, keys: &str) {
        let found = self.command(
            "element",
            &json!({"using": "css selector", "value": format!("[data-test=\"{test}\"]")}),
        );
        let id = found
            .as_object()
            .and_then(|o| o.values().next())
            .and_then(Value::as_str)
            .expect("an element")
            .to_owned();
        self.command(&format!("element/{id}/value"), &json!({ "text": keys }));
    }

    /// Types over what stands in a field, as a person would: control and a select it, E000
    /// lets go of the keys.
    pub fn type_into(&self, test: &str, text: &str) {
        self.send_keys(test, &format!("\u{E009}a\u{E000}{text}"));
    }

    /// The design that the address holds, once it has come to rest.
    pub fn design(&self) -> Design {
        std::thread::sleep(Duration::from_millis(400));
        let hash = self.script("return location.hash");
        let (design, problems) = link::read(hash.as_str().expect("a fragment"));
        assert!(problems.is_empty(), "{problems:?}");
        design
    }

    /// Loads the page anew and waits until the old one is gone.
    #[track_caller]
    pub fn reload(&self) {
        self.script("window.before = true; location.reload()");
        self.wait(
            "the reload",
            "return window.before === undefined && document.readyState === 'complete'",
        );
    }

    /// Shows the page as on a phone of this width, CSS pixels.
    pub fn narrow_to(&self, width: u32) {
        self.command(
            "goog/cdp/execute",
            &json!({"cmd": "Emulation.setDeviceMetricsOverride",
                "params": {"width": width, "height": 800, "deviceScaleFactor": 2, "mobile": true}}),
        );
    }

    /// Presses a button.
    pub fn press(&self, test: &str) {
        self.script(&format!(
            "document.querySelector('[data-test=\"{test}\"]').click()"
        ));
    }

    /// Messages of the console at the level of errors.
    pub fn console_errors(&self) -> Vec<String> {
        let log = self.command("se/log", &json!({"type": "browser"}));
        log.as_array()
            .into_iter()
            .flatten()
            .filter(|entry| entry["level"] == "SEVERE")
            .map(|entry| entry["message"].to_string())
            .collect()
    }
}

impl Drop for Browser {
    fn drop(&mut self) {
        // The whole group: killing the driver alone leaves the browser behind.
        let _ = Command::new("kill")
            .arg("--")
            .arg(format!("-{}", self.driver.id()))
            .status();
        let _ = self.driver.wait();
        let _ = std::fs::remove_dir_all(&self.profile);
    }
}
