//! What reaches the two streams, and what happens when they fail.

use super::*;

use std::sync::Arc;

use pastproof::quantity::SampleIndex;

#[derive(Clone, Default)]
struct Sink(Arc<Mutex<Vec<u8>>>);

impl Write for Sink {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.0.lock().unwrap().extend_from_slice(bytes);
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl Sink {
    fn text(&self) -> String {
        String::from_utf8(self.0.lock().unwrap().clone()).unwrap()
    }
}

/// A stream that fails in one way and counts how often it was asked.
#[derive(Clone)]
struct Failing(io::ErrorKind, Arc<Mutex<u32>>);

impl Write for Failing {
    fn write(&mut self, _: &[u8]) -> io::Result<usize> {
        *self.1.lock().unwrap() += 1;
        Err(self.0.into())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

fn stream(writer: impl Write + Send + 'static, colours: bool) -> Stream {
    let shows = Shows {
        terminal: false,
        colours,
    };
    Stream {
        writer: Box::new(writer),
        shows,
    }
}

fn terminal(output: Output) -> (Terminal, Sink, Sink) {
    let (out, err) = (Sink::default(), Sink::default());
    let terminal = Terminal::of(output, stream(out.clone(), false), stream(err.clone(), false));
    (terminal, out, err)
}

fn table() -> Table {
    let mut table = Table::new(&[("ensemble", Align::Left)]);
    table.row(["film".to_string()]);
    table
}

#[test]
fn text_mode_writes_lines_and_no_object() {
    let (terminal, out, err) = terminal(Output::Text);
    terminal.line(Tone::Good, "drew 3 samples").unwrap();
    terminal.table(&table()).unwrap();
    terminal.object(&["an object"]).unwrap();
    terminal.note(Tone::Plain, "a note");
    assert_eq!(out.text(), "drew 3 samples\nensemble\nfilm\n");
    assert_eq!(err.text(), "a note\n");
}

#[test]
fn json_mode_writes_one_object_and_nothing_else() {
    let (terminal, out, err) = terminal(Output::Json);
    terminal.line(Tone::Good, "drew 3 samples").unwrap();
    terminal.table(&table()).unwrap();
    terminal.note(Tone::Plain, "a note");
    terminal
        .object(&serde_json::json!({"samples": 3, "label": "two\nlines"}))
        .unwrap();
    let second = terminal.object(&serde_json::json!({})).unwrap_err();
    assert!(matches!(second.kind(), ErrorKind::SelfCheck { .. }));
    // an error after the answer is told beside it
    terminal.error(&second);
    assert_eq!(out.text(), "{\"label\":\"two\\nlines\",\"samples\":3}\n");
    assert!(err.text().starts_with("a note\npastproof: internal check failed: "));
}

#[test]
fn an_error_has_its_message_and_one_line_of_help() {
    let error = || {
        Error::damaged("found 3 bytes, expected 4")
            .at_sample(SampleIndex(41))
            .in_member("a.csv")
    };
    let message = "a.csv: sample 41: damaged: found 3 bytes, expected 4 [archive.damaged]";
    let (text, out, err) = terminal(Output::Text);
    text.error(&error());
    let help = error().help().unwrap();
    assert_eq!(err.text(), format!("pastproof: {message}\nhelp: {help}\n"));
    assert_eq!(out.text(), "");
    let (text, _, err) = terminal(Output::Text);
    text.error(&Error::value(0, "at least 1"));
    assert_eq!(err.text(), "pastproof: found 0, expected at least 1 [request.value]\n");
    let (json, out, err) = terminal(Output::Json);
    json.error(&error());
    let object: serde_json::Value = serde_json::from_str(&out.text()).unwrap();
    let expected = serde_json::json!({"error": {"code": "archive.damaged", "message": message, "help": help}});
    assert_eq!(object, expected);
    assert_eq!(err.text(), format!("pastproof: {message}\nhelp: {help}\n"));
}

#[test]
fn a_closed_pipe_is_no_failure_and_a_full_disk_is_one() {
    let asked = Arc::new(Mutex::new(0));
    let failing = |kind| stream(Failing(kind, Arc::clone(&asked)), false);
    let closed = Terminal::of(
        Output::Text,
        failing(io::ErrorKind::BrokenPipe),
        stream(Sink::default(), false),
    );
    for _ in 0..3 {
        closed.line(Tone::Plain, "nobody reads this").unwrap();
    }
    assert_eq!(*asked.lock().unwrap(), 1, "a closed pipe is not tried again");
    let full = Terminal::of(
        Output::Text,
        failing(io::ErrorKind::StorageFull),
        failing(io::ErrorKind::BrokenPipe),
    );
    let error = full.line(Tone::Plain, "no room").unwrap_err();
    assert_eq!(error.code(), "machine.io");
    // nobody can be told, and nobody panics
    full.error(&error);
}

#[test]
fn control_characters_are_shown_not_obeyed() {
    let (terminal, out, err) = terminal(Output::Text);
    terminal.line(Tone::Plain, "a\u{1b}[2Jb\r\u{202e}c\u{9b}d\ne").unwrap();
    assert_eq!(out.text(), "a\\u{1b}[2Jb\\r\\u{202e}c\\u{9b}d\ne\n");
    terminal.error(&Error::damaged("\u{7}"));
    assert!(err.text().contains("damaged: \\u{7} ["));
}

/// Expected: <https://no-color.org> (any value but the empty one), and common practice for `dumb`.
#[test]
fn colours_only_for_those_who_want_them() {
    let text = |value| Some(OsStr::new(value));
    assert!(shows(true, None, text("xterm")).colours);
    assert!(shows(true, text(""), None).colours);
    assert!(!shows(true, text("1"), None).colours);
    assert!(!shows(true, None, text("dumb")).colours);
    assert!(!shows(false, None, text("xterm")).colours);
    let (out, plain) = (Sink::default(), Sink::default());
    let terminal = Terminal::of(Output::Text, stream(out.clone(), true), stream(plain.clone(), false));
    terminal.line(Tone::Bad, "no\u{1b}").unwrap();
    terminal.note(Tone::Bad, "no");
    assert_eq!(out.text(), "\u{1b}[31mno\\u{1b}\u{1b}[0m\n");
    assert_eq!(plain.text(), "no\n");
}

#[test]
fn progress_counts_from_any_thread_and_lets_go_of_the_bar() {
    let (terminal, out, err) = terminal(Output::Json);
    let progress = terminal.progress(8, Unit::Samples);
    progress.ensemble("film");
    std::thread::scope(|scope| {
        for _ in 0..4 {
            scope.spawn(|| progress.advance(2));
        }
    });
    drop(progress);
    assert!(terminal.streams().bar.is_none());
    // less than ten seconds: not a word
    assert_eq!((out.text(), err.text()), (String::new(), String::new()));
}
