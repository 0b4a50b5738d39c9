//! The folders follow the environment. Each case is a process of its own, since the environment of
//! this one is shared by all tests.

use std::process::Command;

/// Run by the test below too, in a process of its own.
#[test]
fn told() {
    let Some(p) = rackside::store::places() else {
        assert!(std::env::var_os("HOME").is_none());
        return;
    };
    for folder in [&p.data, &p.state, &p.config] {
        assert!(folder.is_absolute() && folder.to_string_lossy().contains("rackside"));
    }
    #[allow(clippy::print_stdout)]
    {
        println!(
            "told {} {} {}",
            p.data.display(),
            p.state.display(),
            p.config.display()
        );
    }
}

#[cfg(target_os = "linux")]
#[test]
fn the_environment_says_where() {
    let told = |set: &[(&str, &str)]| {
        let out = Command::new(std::env::current_exe().unwrap())
            .args(["--exact", "places::told", "--nocapture"])
            .env_clear()
            .envs(set.iter().copied())
            .output()
            .unwrap();
        let out = String::from_utf8(out.stdout).unwrap();
        let at = out.find("told /").unwrap();
        out[at..].lines().next().unwrap().to_string()
    };
    // The defaults of the XDG Base Directory Specification, version 0.8.
    assert_eq!(
        told(&[("HOME", "/h")]),
        "told /h/.local/share/rackside /h/.local/state/rackside /h/.config/rackside"
    );
    assert_eq!(
        told(&[
            ("HOME", "/h"),
            ("XDG_DATA_HOME", "/d"),
            ("XDG_STATE_HOME", "/s"),
            ("XDG_CONFIG_HOME", "/c"),
        ]),
        "told /d/rackside /s/rackside /c/rackside"
    );
}
