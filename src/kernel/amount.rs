//! Straight-line code for derivatives: amounts that may be constants, folded while they are, and the derivative rules.

use crate::numbers::functions;
use crate::numbers::operation::{Binary, Relation, Unary};

use super::program::{Instruction, Program, Register, Step};

/// A quantity under construction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Amount {
    /// A constant.
    Constant(f64),
    /// A register; gated where it may be an exact 0 that stands for "not taken", so that products with it must not
    /// turn an infinity into NaN.
    Register(Register, bool),
}

impl Amount {
    /// An ordinary register.
    pub fn of(register: Register) -> Self {
        Amount::Register(register, false)
    }

    /// Whether it is the constant 0.
    pub fn is_zero(self) -> bool {
        self == Amount::Constant(0.0)
    }

    /// Whether it may stand for "not taken".
    pub fn is_gated(self) -> bool {
        matches!(self, Amount::Register(_, true))
    }
}

/// Writes straight-line code at the end of a block.
pub struct Writer<'a> {
    /// The program whose registers are used.
    pub program: &'a mut Program,
    /// The block.
    pub steps: &'a mut Vec<Step>,
}

impl Writer<'_> {
    /// Adds an instruction made for a new register.
    pub fn put(&mut self, make: impl FnOnce(Register) -> Instruction) -> Register {
        let to = self.program.fresh();
        self.steps.push(Step::Do(make(to)));
        to
    }

    /// The amount in a register.
    pub fn register(&mut self, amount: Amount) -> Register {
        match amount {
            Amount::Register(register, _) => register,
            Amount::Constant(value) => self.put(|to| Instruction::Constant { to, bits: value.to_bits() }),
        }
    }

    /// An operation of one operand.
    pub fn unary(&mut self, operation: Unary, of: Amount) -> Amount {
        match of {
            Amount::Constant(value) => Amount::Constant(functions::unary(operation, value)),
            Amount::Register(of, gated) => Amount::Register(
                self.put(|to| Instruction::Unary { to, operation, of }),
                gated && operation == Unary::Negate,
            ),
        }
    }

    /// A sum.
    pub fn add(&mut self, left: Amount, right: Amount) -> Amount {
        match (left, right) {
            (Amount::Constant(a), Amount::Constant(b)) => Amount::Constant(a + b),
            _ if left.is_zero() => right,
            _ if right.is_zero() => left,
            _ => {
                let gated = left.is_gated() || right.is_gated();
                let (left, right) = (self.register(left), self.register(right));
                Amount::Register(self.put(|to| Instruction::Binary { to, operation: Binary::Add, left, right }), gated)
            }
        }
    }

    /// A product; of something gated with anything, 0 where that is 0.
    pub fn multiply(&mut self, left: Amount, right: Amount) -> Amount {
        match (left, right) {
            (Amount::Constant(a), Amount::Constant(b)) => Amount::Constant(a * b),
            (Amount::Constant(0.0), _) | (_, Amount::Constant(0.0)) => Amount::Constant(0.0),
            (Amount::Constant(1.0), other) | (other, Amount::Constant(1.0)) => other,
            (Amount::Constant(-1.0), other) | (other, Amount::Constant(-1.0)) => self.unary(Unary::Negate, other),
            _ => {
                // The gated one to the left, which is the one that a gate looks at.
                let (left, right) = if right.is_gated() { (right, left) } else { (left, right) };
                let plain = !left.is_gated() || matches!(right, Amount::Constant(_));
                let operation = if plain { Binary::Multiply } else { Binary::Gate };
                let gated = left.is_gated();
                let (left, right) = (self.register(left), self.register(right));
                Amount::Register(self.put(|to| Instruction::Binary { to, operation, left, right }), gated)
            }
        }
    }

    /// A quotient.
    pub fn divide(&mut self, left: Amount, right: Amount) -> Amount {
        let inverse = self.unary(Unary::Reciprocal, right);
        self.multiply(left, inverse)
    }

    /// A whole power.
    pub fn power(&mut self, of: Amount, exponent: i32) -> Amount {
        match (of, exponent) {
            (_, 0) => Amount::Constant(1.0),
            (_, 1) => of,
            (Amount::Constant(value), _) => Amount::Constant(functions::power(value, exponent)),
            (Amount::Register(of, _), _) => Amount::of(self.put(|to| Instruction::Power { to, of, exponent })),
        }
    }

    /// One of two, by a comparison of registers; what is not taken is 0.
    pub fn gate(&mut self, relation: Relation, sides: (Register, Register), then: Amount, otherwise: Amount) -> Amount {
        let (left, right) = sides;
        let (then, otherwise) = (self.register(then), self.register(otherwise));
        let to = self.put(|to| Instruction::Select { to, relation, left, right, then, otherwise });
        Amount::Register(to, true)
    }

    /// The derivative of an operation of one operand, where `x` is the operand and `value` the result.
    ///
    /// At kinks: 0 for `abs` at 0; 0 for `sign` and `floor` everywhere.
    pub fn unary_slope(&mut self, operation: Unary, x: Register, value: Register) -> Amount {
        let (x, value) = (Amount::of(x), Amount::of(value));
        let one = Amount::Constant(1.0);
        let minus = Amount::Constant(-1.0);
        let one_less_square = |writer: &mut Self| {
            let square = writer.multiply(x, x);
            let negative = writer.multiply(minus, square);
            writer.add(one, negative)
        };
        match operation {
            Unary::Negate => minus,
            Unary::Absolute => self.unary(Unary::Sign, x),
            Unary::Sign | Unary::Floor => Amount::Constant(0.0),
            Unary::Reciprocal => {
                let square = self.power(x, -2);
                self.multiply(minus, square)
            }
            Unary::SquareRoot => self.divide(Amount::Constant(0.5), value),
            Unary::Exponential => value,
            Unary::Logarithm => self.divide(one, x),
            Unary::Logarithm10 => self.divide(Amount::Constant(std::f64::consts::LOG10_E), x),
            Unary::Sine => self.unary(Unary::Cosine, x),
            Unary::Cosine => {
                let sine = self.unary(Unary::Sine, x);
                self.multiply(minus, sine)
            }
            Unary::Tangent => {
                let square = self.multiply(value, value);
                self.add(one, square)
            }
            Unary::ArcSine | Unary::ArcCosine => {
                let inside = one_less_square(self);
                let root = self.unary(Unary::SquareRoot, inside);
                self.divide(if operation == Unary::ArcSine { one } else { minus }, root)
            }
            Unary::ArcTangent => {
                let square = self.multiply(x, x);
                let below = self.add(one, square);
                self.divide(one, below)
            }
            Unary::HyperbolicSine => self.unary(Unary::HyperbolicCosine, x),
            Unary::HyperbolicCosine => self.unary(Unary::HyperbolicSine, x),
            Unary::HyperbolicTangent => {
                let square = self.multiply(value, value);
                let negative = self.multiply(minus, square);
                self.add(one, negative)
            }
            Unary::ErrorFunction => {
                let square = self.multiply(x, x);
                let negative = self.multiply(minus, square);
                let bell = self.unary(Unary::Exponential, negative);
                self.multiply(Amount::Constant(std::f64::consts::FRAC_2_SQRT_PI), bell)
            }
        }
    }

    /// The derivatives of an operation of two operands by the operands that are asked for, 0 for the others.
    ///
    /// Where `min` and `max` tie, the second operand counts.
    pub fn binary_slopes(
        &mut self,
        operation: Binary,
        (left, right): (Register, Register),
        value: Register,
        asked: (bool, bool),
    ) -> (Amount, Amount) {
        let (x, y, zero, one) = (Amount::of(left), Amount::of(right), Amount::Constant(0.0), Amount::Constant(1.0));
        let mut when = |wanted: bool, make: &mut dyn FnMut(&mut Self) -> Amount| if wanted { make(self) } else { zero };
        match operation {
            Binary::Add => (one, one),
            Binary::Subtract => (one, Amount::Constant(-1.0)),
            Binary::Multiply => (y, x),
            // What the gate hides it hides in the derivative too.
            Binary::Gate => (y, Amount::Register(left, true)),
            Binary::Divide => (
                when(asked.0, &mut |writer| writer.divide(one, y)),
                when(asked.1, &mut |writer| {
                    let ratio = writer.divide(Amount::of(value), y);
                    writer.multiply(Amount::Constant(-1.0), ratio)
                }),
            ),
            Binary::Minimum => (
                when(asked.0, &mut |writer| writer.gate(Relation::Less, (left, right), one, zero)),
                when(asked.1, &mut |writer| writer.gate(Relation::Less, (left, right), zero, one)),
            ),
            Binary::Maximum => (
                when(asked.0, &mut |writer| writer.gate(Relation::Less, (right, left), one, zero)),
                when(asked.1, &mut |writer| writer.gate(Relation::Less, (right, left), zero, one)),
            ),
            Binary::Power => (
                when(asked.0, &mut |writer| {
                    let lower = writer.add(y, Amount::Constant(-1.0));
                    let (left, right) = (writer.register(x), writer.register(lower));
                    let power = writer.put(|to| Instruction::Binary { to, operation, left, right });
                    writer.multiply(y, Amount::of(power))
                }),
                when(asked.1, &mut |writer| {
                    let logarithm = writer.unary(Unary::Logarithm, x);
                    writer.multiply(Amount::of(value), logarithm)
                }),
            ),
            Binary::ArcTangent2 => {
                let (across, along) = (self.multiply(x, x), self.multiply(y, y));
                let square = self.add(across, along);
                let inverse = self.unary(Unary::Reciprocal, square);
                let by_x = self.multiply(y, inverse);
                let by_y = self.multiply(x, inverse);
                (by_x, self.multiply(Amount::Constant(-1.0), by_y))
            }
            Binary::Hypotenuse => {
                let inverse = self.unary(Unary::Reciprocal, Amount::of(value));
                (self.multiply(x, inverse), self.multiply(y, inverse))
            }
        }
    }
}
