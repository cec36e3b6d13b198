//! The scalar operations that the language, the terms and the programs share.
//!
//! One list, so that a function is named once: the checker's table of functions, the derivative rules, the executors
//! and the printed programs all speak of these.

/// An operation of one operand.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Unary {
    /// `-x`
    Negate,
    /// `|x|`
    Absolute,
    /// -1, 0 or 1; NaN at NaN. Its derivative counts as 0.
    Sign,
    /// The greatest whole number at or below `x`. Its derivative counts as 0.
    Floor,
    /// `1/x`
    Reciprocal,
    /// The square root.
    SquareRoot,
    /// The exponential function.
    Exponential,
    /// The natural logarithm.
    Logarithm,
    /// The logarithm to base 10.
    Logarithm10,
    /// The sine, in radians.
    Sine,
    /// The cosine, in radians.
    Cosine,
    /// The tangent, in radians.
    Tangent,
    /// The inverse sine.
    ArcSine,
    /// The inverse cosine.
    ArcCosine,
    /// The inverse tangent.
    ArcTangent,
    /// The hyperbolic sine.
    HyperbolicSine,
    /// The hyperbolic cosine.
    HyperbolicCosine,
    /// The hyperbolic tangent.
    HyperbolicTangent,
    /// The error function.
    ErrorFunction,
}

/// An operation of two operands.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Binary {
    /// `x + y`
    Add,
    /// `x - y`
    Subtract,
    /// `x * y`
    Multiply,
    /// `x / y`
    Divide,
    /// The smaller; NaN where either is NaN.
    Minimum,
    /// The larger; NaN where either is NaN.
    Maximum,
    /// `x^y` for a real exponent (whole constant exponents become products before they get here).
    Power,
    /// `atan2(y, x)`, first operand `y`.
    ArcTangent2,
    /// `sqrt(x^2 + y^2)` without needless overflow.
    Hypotenuse,
    /// `x * y`, but 0 wherever `x` is 0, even if `y` is infinite or NaN. The derivative pass uses it where an adjoint
    /// may be 0 because a branch was not taken: what a branch does outside its own region must not leak out.
    Gate,
}

/// A comparison; false wherever an operand is NaN, except `NotEqual`, which is then true.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Relation {
    /// `<`
    Less,
    /// `<=`
    LessOrEqual,
    /// `==`
    Equal,
    /// `!=`
    NotEqual,
}

impl Relation {
    /// Whether the relation holds between two numbers.
    ///
    /// ```
    /// use thalweg::numbers::operation::Relation;
    /// assert!(Relation::LessOrEqual.holds(1.0, 1.0));
    /// assert!(!Relation::Less.holds(f64::NAN, 1.0));
    /// ```
    #[inline(always)]
    pub fn holds(self, left: f64, right: f64) -> bool {
        match self {
            Relation::Less => left < right,
            Relation::LessOrEqual => left <= right,
            Relation::Equal => left == right,
            Relation::NotEqual => left != right,
        }
    }
}

macro_rules! names {
    ($type:ident: $($variant:ident $name:literal),* $(,)?) => {
        impl $type {
            /// Every one, in the order of declaration.
            pub const ALL: &'static [$type] = &[$($type::$variant),*];

            /// The name in printed programs.
            pub fn name(self) -> &'static str {
                match self { $($type::$variant => $name),* }
            }

            /// The one with this printed name.
            pub fn from_name(name: &str) -> Option<Self> {
                match name { $($name => Some($type::$variant),)* _ => None }
            }
        }
    };
}

names! { Unary:
    Negate "neg", Absolute "abs", Sign "sign", Floor "floor", Reciprocal "recip", SquareRoot "sqrt",
    Exponential "exp", Logarithm "log", Logarithm10 "log10", Sine "sin", Cosine "cos", Tangent "tan",
    ArcSine "asin", ArcCosine "acos", ArcTangent "atan", HyperbolicSine "sinh", HyperbolicCosine "cosh",
    HyperbolicTangent "tanh", ErrorFunction "erf",
}
names! { Binary:
    Add "add", Subtract "sub", Multiply "mul", Divide "div", Minimum "min", Maximum "max", Power "pow",
    ArcTangent2 "atan2", Hypotenuse "hypot", Gate "gate",
}
names! { Relation: Less "lt", LessOrEqual "le", Equal "eq", NotEqual "ne" }
