//! What has to be on the machine: the wasm32 target, wasm-bindgen, Trunk, a browser.

use crate::Outcome;
use std::path::{Path, PathBuf};
use std::process::Command;

/// The version in Cargo.lock; wasm-bindgen's two halves must match exactly.
const TRUNK: &str = "0.21.14";
const WASM: &str = "wasm32-unknown-unknown";
const PACKAGED: &str = "/usr/bin";
const DEBIAN_WASM: [&str; 5] = [
    "rustc-web",
    "cargo-web",
    "rust-web-src",
    "rust-web-llvm",
    "lld-22",
];

/// The top folder of the checkout.
pub(crate) fn root() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("../..")
        .canonicalize()
        .unwrap_or_else(|_| PathBuf::from("."))
}

/// Runs a command, printed first.
pub(crate) fn run(command: &mut Command) -> Outcome {
    println!("> {} {}", command.get_program().to_string_lossy(), {
        let words: Vec<_> = command
            .get_args()
            .map(|a| a.to_string_lossy().into_owned())
            .collect();
        words.join(" ")
    });
    match command.current_dir(root()).status() {
        Ok(status) if status.success() => Ok(()),
        Ok(status) => Err(format!(
            "{} ended with {status}",
            command.get_program().to_string_lossy()
        )),
        Err(error) => Err(format!(
            "{} did not start: {error}",
            command.get_program().to_string_lossy()
        )),
    }
}

fn output(program: &str, arguments: &[&str]) -> Option<String> {
    let output = Command::new(program).args(arguments).output().ok()?;
    output
        .status
        .success()
        .then(|| String::from_utf8_lossy(&output.stdout).trim().to_owned())
}

/// How WebAssembly is compiled here.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(crate) enum Wasm {
    /// The toolchain has the target's library.
    Target,
    /// The distribution's toolchain builds the library from its source.
    Packaged,
}

impl Wasm {
    /// Sets what the build needs on the child process alone.
    pub(crate) fn dress<'a>(&self, command: &'a mut Command, tools: &[PathBuf]) -> &'a mut Command {
        let mut path: Vec<PathBuf> = tools.to_vec();
        if *self == Self::Packaged {
            path.push(PACKAGED.into());
            command
                .env("RUSTC_BOOTSTRAP", "1")
                .env("CARGO_UNSTABLE_BUILD_STD", "std,panic_abort");
            for name in ["RUSTC", "RUSTDOC", "CARGO", "RUSTUP_TOOLCHAIN"] {
                command.env_remove(name);
            }
            command.env("CARGO_TARGET_DIR", root().join("target/packaged"));
        }
        if let Some(old) = std::env::var_os("PATH") {
            path.extend(std::env::split_paths(&old));
        }
        if let Ok(path) = std::env::join_paths(path) {
            command.env("PATH", path);
        }
        command
    }
}

fn has_target_library() -> bool {
    output("rustc", &["--print", "target-libdir", "--target", WASM])
        .and_then(|folder| std::fs::read_dir(folder).ok())
        .is_some_and(|mut files| {
            files.any(|f| f.is_ok_and(|f| f.file_name().to_string_lossy().starts_with("libstd")))
        })
}

fn packaged_is_there() -> bool {
    Path::new("/usr/bin/rustc").exists()
        && Path::new("/usr/bin/cargo").exists()
        && Path::new("/usr/bin/rust-lld").exists()
        && output("/usr/bin/rustc", &["--print", "sysroot"]).is_some_and(|s| {
            Path::new(&s)
                .join("lib/rustlib/src/rust/library/std")
                .exists()
        })
}

/// Debian packages, installed where that is possible.
fn debian(packages: &[&str]) -> bool {
    let root_user = output("id", &["-u"]).is_some_and(|id| id == "0");
    if !root_user || !Path::new("/usr/bin/apt-get").exists() {
        return false;
    }
    run(Command::new("apt-get").arg("update")).is_ok()
        && run(Command::new("apt-get")
            .args(["install", "-y", "--no-install-recommends"])
            .args(packages))
        .is_ok()
}

/// Finds or makes a way to compile WebAssembly.
pub(crate) fn wasm() -> Result<Wasm, String> {
    if has_target_library() {
        return Ok(Wasm::Target);
    }
    if run(Command::new("rustup").args(["target", "add", WASM])).is_ok() && has_target_library() {
        return Ok(Wasm::Target);
    }
    if packaged_is_there() {
        return Ok(Wasm::Packaged);
    }
    if debian(&DEBIAN_WASM) && packaged_is_there() {
        return Ok(Wasm::Packaged);
    }
    Err(format!(
        "no way to compile WebAssembly was found. Install it with `rustup target add {WASM}`, or on Debian with `apt-get install {}`",
        DEBIAN_WASM.join(" ")
    ))
}

fn cache() -> PathBuf {
    std::env::var_os("EVENFALL_TOOLS")
        .map(PathBuf::from)
        .unwrap_or_else(|| {
            let home = std::env::var_os("HOME").map_or_else(|| PathBuf::from("."), PathBuf::from);
            home.join(".cache/evenfall-tools")
        })
}

fn locked_bindgen() -> Result<String, String> {
    let lock = std::fs::read_to_string(root().join("Cargo.lock"))
        .map_err(|e| format!("Cargo.lock: {e}"))?;
    lock.split("name = \"wasm-bindgen\"\nversion = \"")
        .nth(1)
        .and_then(|rest| rest.split('"').next())
        .map(str::to_owned)
        .ok_or_else(|| "Cargo.lock names no wasm-bindgen".to_owned())
}

/// Folders that hold wasm-bindgen and Trunk in the right versions, installed if need be.
pub(crate) fn page_tools() -> Result<Vec<PathBuf>, String> {
    let bindgen = locked_bindgen()?;
    let mut folders = Vec::new();
    if !output("wasm-bindgen", &["--version"]).is_some_and(|v| v.ends_with(&bindgen)) {
        let folder = cache().join(format!("wasm-bindgen-{bindgen}"));
        if !folder.join("bin/wasm-bindgen").exists() {
            run(Command::new("cargo")
                .args([
                    "install",
                    "wasm-bindgen-cli",
                    "--version",
                    &bindgen,
                    "--root",
                ])
                .arg(&folder))?;
        }
        folders.push(folder.join("bin"));
    }
    if !output("trunk", &["--version"]).is_some_and(|v| v.ends_with(TRUNK)) {
        let folder = cache().join(format!("trunk-{TRUNK}"));
        if !folder.join("bin/trunk").exists() {
            run(Command::new("cargo")
                .args([
                    "install",
                    "trunk",
                    "--version",
                    TRUNK,
                    "--locked",
                    "--no-default-features",
                    "--root",
                ])
                .arg(&folder)
                .env("CARGO_PROFILE_RELEASE_OPT_LEVEL", "0")
                .env("CARGO_PROFILE_RELEASE_LTO", "off")
                .env("CARGO_PROFILE_RELEASE_CODEGEN_UNITS", "16")
                .env("CARGO_PROFILE_RELEASE_DEBUG", "0"))?;
        }
        folders.push(folder.join("bin"));
    }
    Ok(folders)
}

/// A browser and its driver.
pub(crate) fn browser() -> Outcome {
    let there =
        || Path::new("/usr/bin/chromium").exists() && Path::new("/usr/bin/chromedriver").exists();
    if there() || (debian(&["chromium", "chromium-driver"]) && there()) {
        Ok(())
    } else {
        Err("the browser tests need Chromium and ChromeDriver in /usr/bin: on Debian `apt-get install chromium chromium-driver`".to_owned())
    }
}
