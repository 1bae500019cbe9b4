//! How things are marked: always by a word or a sign, and by colour only besides. Blue and orange, never red against
//! green. Without colour the same places are bold or reversed; without UTF-8 every sign has a plain one.

use ratatui::style::{Color, Modifier, Style};

const ORANGE: Color = Color::Indexed(208);
const BLUE: Color = Color::Indexed(75);

/// What the terminal can show.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Theme {
    pub colour: bool,
    pub ascii: bool,
}

impl Theme {
    /// Must be seen first.
    pub fn alert(self) -> Style {
        let style = Style::new().add_modifier(Modifier::BOLD);
        if self.colour { style.fg(Color::Black).bg(ORANGE) } else { style.add_modifier(Modifier::REVERSED) }
    }

    /// Not as planned.
    pub fn caution(self) -> Style {
        let style = Style::new().add_modifier(Modifier::BOLD);
        if self.colour { style.fg(ORANGE) } else { style.add_modifier(Modifier::UNDERLINED) }
    }

    /// As planned.
    pub fn good(self) -> Style {
        if self.colour { Style::new().fg(BLUE) } else { Style::new() }
    }

    pub fn strong(self) -> Style {
        Style::new().add_modifier(Modifier::BOLD)
    }

    pub fn quiet(self) -> Style {
        Style::new().add_modifier(Modifier::DIM)
    }

    fn pick(self, sign: &'static str, plain: &'static str) -> &'static str {
        if self.ascii { plain } else { sign }
    }

    pub fn band(self) -> &'static str {
        self.pick("░", ":")
    }

    pub fn planned(self) -> &'static str {
        self.pick("·", ".")
    }

    pub fn limit(self) -> &'static str {
        self.pick("╌", "-")
    }

    pub fn trace(self) -> &'static str {
        self.pick("•", "o")
    }

    pub fn now(self) -> &'static str {
        self.pick("◆", "@")
    }

    pub fn now_stale(self) -> &'static str {
        self.pick("◇", "?")
    }

    pub fn pointer(self) -> &'static str {
        self.pick("►", ">")
    }

    pub fn axis(self) -> &'static str {
        self.pick("│", "|")
    }

    pub fn bar(self) -> &'static str {
        self.pick("█", "#")
    }

    pub fn power_stroke(self) -> &'static str {
        self.pick("━", "=")
    }

    pub fn run_out(self) -> &'static str {
        self.pick("─", "-")
    }

    pub fn brake(self) -> &'static str {
        self.pick("▒", "%")
    }

    pub fn stop(self) -> &'static str {
        self.pick("▐", "]")
    }

    pub fn mark(self) -> &'static str {
        self.pick("▼", "v")
    }

    pub fn dot(self) -> &'static str {
        self.pick("·", "-")
    }

    pub fn shuttle(self) -> &'static str {
        self.pick("▐█▌", "[#]")
    }
}
