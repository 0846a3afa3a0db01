//! The watch on a terminal: draws the screen, reads the keys, and gives the terminal back whatever happens.

use super::feed::Feed;
use super::screen::Shown;
use super::session::Session;
use crate::bench::{Bench, Dimension, parse_quantity};
use crate::cli::exit::{Exit, Failure, say};
use crate::cli::files::FileError;
use crate::report;
use crossterm::event::{self, Event, KeyCode, KeyEvent, KeyEventKind, KeyModifiers};
use crossterm::{cursor, execute, queue, style, terminal};
use std::io::{self, Write};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::mpsc::RecvTimeoutError;
use std::time::{Duration, Instant};

/// How long audio is waited for before keys are looked after, and time between two drawings at least.
const TICK: Duration = Duration::from_millis(20);
const REDRAW: Duration = Duration::from_millis(100);

/// The terminal while it is ours.
struct Held;

impl Held {
    fn new() -> io::Result<Self> {
        terminal::enable_raw_mode()?;
        let held = Self;
        execute!(io::stdout(), terminal::EnterAlternateScreen, cursor::Hide)?;
        // A panic anywhere tells its message on the screen that was there before.
        let before = std::panic::take_hook();
        std::panic::set_hook(Box::new(move |panic| {
            give_back();
            before(panic);
        }));
        Ok(held)
    }
}

impl Drop for Held {
    fn drop(&mut self) {
        give_back();
    }
}

fn give_back() {
    // If the terminal is gone nothing can be given back.
    let _ = execute!(io::stdout(), cursor::Show, terminal::LeaveAlternateScreen);
    let _ = terminal::disable_raw_mode();
}

/// What a key asks for.
#[derive(Debug, PartialEq, Eq)]
enum Wish {
    Nothing,
    Quit,
    Hold,
    Reset,
    Mark(String),
    Supply(String),
}

/// Question that is open.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Question {
    Mark,
    Supply,
}

/// Runs a watch on the terminal.
///
/// # Errors
/// A source that fails, a terminal that cannot be used.
pub(super) fn run(mut session: Session, feed: &Feed, bench: Option<&Bench>) -> Result<Exit, Failure> {
    let failed = |error| Failure::file("the terminal", &FileError::from_io("writing", error));
    let stop = stop_flag().map_err(failed)?;
    let mut shown = Shown { name: session.name().to_owned(), every_s: session.every_s(), ..Shown::default() };
    let held = Held::new().map_err(failed)?;
    let mut question = None;
    let mut drawn: Option<Instant> = None;
    let mut fresh = true;
    let ended = loop {
        match feed.pieces.recv_timeout(TICK) {
            Ok(piece) => match session.take(piece) {
                Ok(news) => {
                    fresh |= !news.glances.is_empty() || !news.told.is_empty();
                    if news.glances.iter().any(|glance| !glance.alarms.is_empty()) {
                        ring().map_err(failed)?;
                    }
                    news.told.into_iter().for_each(|message| shown.tell(message));
                    news.glances.into_iter().for_each(|glance| shown.take(glance));
                    if news.ended {
                        break Ok(());
                    }
                }
                Err(failure) => break Err(failure),
            },
            Err(RecvTimeoutError::Timeout) => {}
            Err(RecvTimeoutError::Disconnected) => break Ok(()),
        }
        if stop.load(Ordering::Relaxed) {
            break Ok(());
        }
        while event::poll(Duration::ZERO).map_err(failed)? {
            fresh = true;
            match event::read().map_err(failed)? {
                Event::Key(key) if key.kind != KeyEventKind::Release => {
                    let wish = wish(key, &mut question, &mut shown);
                    if wish == Wish::Quit {
                        stop.store(true, Ordering::Relaxed);
                    }
                    fulfil(wish, &mut session, bench, &mut shown);
                }
                _ => {}
            }
        }
        if fresh && drawn.is_none_or(|at| at.elapsed() > REDRAW) {
            draw(&shown).map_err(failed)?;
            (drawn, fresh) = (Some(Instant::now()), false);
        }
    };
    drop(held);
    ended?;
    let (whole, exit) = session.finish()?;
    say(&report::measurement_text(&whole))?;
    Ok(exit)
}

/// Set when the process is asked to end.
fn stop_flag() -> io::Result<Arc<AtomicBool>> {
    let flag = Arc::new(AtomicBool::new(false));
    #[cfg(unix)]
    for signal in [signal_hook::consts::SIGTERM, signal_hook::consts::SIGINT, signal_hook::consts::SIGHUP] {
        signal_hook::flag::register(signal, flag.clone())?;
    }
    Ok(flag)
}

fn ring() -> io::Result<()> {
    let mut out = io::stdout();
    out.write_all(b"\x07")?;
    out.flush()
}

fn draw(shown: &Shown) -> io::Result<()> {
    let (width, height) = terminal::size()?;
    let mut out = io::stdout();
    for (row, line) in shown.lines(usize::from(width), usize::from(height)).into_iter().enumerate() {
        queue!(
            out,
            cursor::MoveTo(0, row as u16),
            style::Print(line),
            terminal::Clear(terminal::ClearType::UntilNewLine)
        )?;
    }
    out.flush()
}

fn wish(key: KeyEvent, question: &mut Option<Question>, shown: &mut Shown) -> Wish {
    if key.modifiers.contains(KeyModifiers::CONTROL) {
        return if key.code == KeyCode::Char('c') { Wish::Quit } else { Wish::Nothing };
    }
    let Some(asked) = *question else {
        let (ask, words) = match key.code {
            KeyCode::Char('q') => return Wish::Quit,
            KeyCode::Char('h') => return Wish::Hold,
            KeyCode::Char('r') => return Wish::Reset,
            KeyCode::Char('m') => (Question::Mark, "note of the mark"),
            KeyCode::Char('s') => (Question::Supply, "supply now, such as 9.2 kV"),
            _ => return Wish::Nothing,
        };
        *question = Some(ask);
        shown.typed = Some((words, String::new()));
        return Wish::Nothing;
    };
    let Some((_, text)) = &mut shown.typed else { return Wish::Nothing };
    match key.code {
        KeyCode::Char(c) => text.push(c),
        KeyCode::Backspace => {
            text.pop();
        }
        KeyCode::Esc => (*question, shown.typed) = (None, None),
        KeyCode::Enter => {
            let text = std::mem::take(text);
            (*question, shown.typed) = (None, None);
            return match asked {
                Question::Mark => Wish::Mark(text),
                Question::Supply => Wish::Supply(text),
            };
        }
        _ => {}
    }
    Wish::Nothing
}

fn fulfil(wish: Wish, session: &mut Session, bench: Option<&Bench>, shown: &mut Shown) {
    match wish {
        Wish::Nothing | Wish::Quit => {}
        Wish::Hold => shown.held = !shown.held,
        Wish::Reset => {
            session.reset();
            shown.rates_hz.clear();
            shown.tell("begun anew".to_owned());
        }
        Wish::Mark(note) => {
            let failed = session.mark(&note);
            shown.tell(format!("mark: {note}"));
            failed.into_iter().for_each(|message| shown.tell(message));
        }
        Wish::Supply(text) => match parse_quantity(&text, Dimension::Voltage) {
            Err(error) => shown.tell(format!("supply: {error}")),
            Ok(supply) => match session.set_supply(bench, supply) {
                Ok(failed) => {
                    shown.supply = Some(text);
                    failed.into_iter().for_each(|message| shown.tell(message));
                }
                Err(error) => shown.tell(format!("supply: {error}")),
            },
        },
    }
}
