//! The figures of an answer: named, ordered, each with its meaning, so that every writer (JSON, CSV,
//! report) treats all kinds of question alike.

use crate::quantity::Figure;

/// What a number means, and so how it is printed and in which unit.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Meaning {
    /// A level, reading or limit in the quantity's unit.
    Value,
    /// A difference or sd in the quantity's unit.
    Spread,
    /// A ratio of two levels (log scale), unit 1.
    Ratio,
    /// A geometric sd, unit 1.
    Factor,
    /// A probability.
    Chance,
    /// A share of readings, unit 1.
    Share,
    /// A number of readings, expected or counted.
    Count,
    /// An expected rank.
    Rank,
}

#[derive(Debug, Clone, PartialEq)]
pub enum Item {
    Number(Figure, Meaning),
    Whole(Option<u64>),
    Numbers(Vec<f64>, Meaning),
    Texts(Vec<String>),
    /// Rows of named numbers, e.g. of `readings needed`.
    Rows(Vec<Figures>),
    Text(String),
}

/// Named figures in their order.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Figures(pub Vec<(&'static str, Item)>);

impl Figures {
    pub fn with(mut self, name: &'static str, item: Item) -> Figures {
        self.0.push((name, item));
        self
    }

    pub fn number(self, name: &'static str, figure: Figure, meaning: Meaning) -> Figures {
        self.with(name, Item::Number(figure, meaning))
    }

    pub fn get(&self, name: &str) -> Option<&Item> {
        self.0.iter().find(|(own, _)| *own == name).map(|(_, item)| item)
    }

    /// The number of that name, where it exists.
    pub fn value(&self, name: &str) -> Option<f64> {
        match self.get(name) {
            Some(Item::Number(Ok(value), _)) => Some(*value),
            Some(Item::Whole(Some(count))) => Some(*count as f64),
            _ => None,
        }
    }

    pub fn is_empty(&self) -> bool {
        self.0.is_empty()
    }
}
