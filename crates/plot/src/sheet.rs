//! How wide a drawing is.

/// How wide a drawing is and what it leaves free, in pixels of the page.
#[derive(Debug, Clone, Copy)]
pub struct Sheet {
    /// Class of the drawing on its page: which of two widths is shown is the page's to say.
    pub class: &'static str,
    /// From edge to edge.
    pub width: f64,
    /// Left free for numbers.
    pub left: f64,
    /// Right free.
    pub right: f64,
    /// Height of one panel.
    pub panel: f64,
    /// Ticks wanted along the horizontal axis.
    pub ticks: f64,
    /// Samples taken together into one point.
    pub together: usize,
}

/// For a page, and for paper.
pub const WIDE: Sheet = Sheet {
    class: "wide",
    width: 720.0,
    left: 46.0,
    right: 10.0,
    panel: 132.0,
    ticks: 8.0,
    together: 1,
};

/// For a phone: text does not shrink well, so the drawing is another.
pub const NARROW: Sheet = Sheet {
    class: "narrow",
    width: 350.0,
    left: 40.0,
    right: 4.0,
    panel: 118.0,
    ticks: 4.0,
    together: 2,
};

impl Sheet {
    /// Where a frame begins and ends.
    pub fn inner(&self) -> (f64, f64) {
        (self.left, self.width - self.right)
    }
}
