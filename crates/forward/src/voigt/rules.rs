//! Nodes, weights and polynomials of the Voigt kernel.
//!
//! Written by `reference-checks/voigt/make_rules.py` from 50-digit arithmetic; change the script, not this file.

#![allow(
    clippy::approx_constant,
    clippy::excessive_precision,
    clippy::unreadable_literal
)]

use super::quadrature::Node;

/// Trapezoid with step 0.515625, nodes multiples of the step.
pub(super) const TRAPEZOID_FULL_ON: [Node; 12] = [
    Node {
        t_squared: 0.0,
        inverse_weight: 6.092785752416568,
    },
    Node {
        t_squared: 0.265869140625,
        inverse_weight: 3.9742154907387546,
    },
    Node {
        t_squared: 1.0634765625,
        inverse_weight: 8.823642703456194,
    },
    Node {
        t_squared: 2.392822265625,
        inverse_weight: 33.340754008795955,
    },
    Node {
        t_squared: 4.25390625,
        inverse_weight: 214.40451273569013,
    },
    Node {
        t_squared: 6.646728515625,
        inverse_weight: 2346.515504721677,
    },
    Node {
        t_squared: 9.5712890625,
        inverse_weight: 43706.28925830309,
    },
    Node {
        t_squared: 13.027587890625,
        inverse_weight: 1385464.6349022484,
    },
    Node {
        t_squared: 17.015625,
        inverse_weight: 74744278.62579986,
    },
    Node {
        t_squared: 21.535400390625,
        inverse_weight: 6862643935.760036,
    },
    Node {
        t_squared: 26.5869140625,
        inverse_weight: 1072348575764.939,
    },
    Node {
        t_squared: 32.170166015625,
        inverse_weight: 285175028507559.3,
    },
];

/// Trapezoid with step 0.515625, nodes half-way between the multiples of the step.
pub(super) const TRAPEZOID_FULL_BETWEEN: [Node; 12] = [
    Node {
        t_squared: 0.06646728515625,
        inverse_weight: 3.2557592739298973,
    },
    Node {
        t_squared: 0.59820556640625,
        inverse_weight: 5.540937961669413,
    },
    Node {
        t_squared: 1.66168212890625,
        inverse_weight: 16.048900717178878,
    },
    Node {
        t_squared: 3.25689697265625,
        inverse_weight: 79.1112587138439,
    },
    Node {
        t_squared: 5.38385009765625,
        inverse_weight: 663.6854549661534,
    },
    Node {
        t_squared: 8.04254150390625,
        inverse_weight: 9475.8310047246,
    },
    Node {
        t_squared: 11.23297119140625,
        inverse_weight: 230251.9489527752,
    },
    Node {
        t_squared: 14.95513916015625,
        inverse_weight: 9521827.830487594,
    },
    Node {
        t_squared: 19.20904541015625,
        inverse_weight: 670144311.4224397,
    },
    Node {
        t_squared: 23.99468994140625,
        inverse_weight: 80268906689.83044,
    },
    Node {
        t_squared: 29.31207275390625,
        inverse_weight: 16362790173909.803,
    },
    Node {
        t_squared: 35.16119384765625,
        inverse_weight: 5676731800669324.0,
    },
];

/// Trapezoid with step 0.75, nodes multiples of the step.
pub(super) const TRAPEZOID_FAST_ON: [Node; 6] = [
    Node {
        t_squared: 0.0,
        inverse_weight: 4.188790204786391,
    },
    Node {
        t_squared: 0.5625,
        inverse_weight: 3.675777877970019,
    },
    Node {
        t_squared: 2.25,
        inverse_weight: 19.871067468469704,
    },
    Node {
        t_squared: 5.0625,
        inverse_weight: 330.88297987278065,
    },
    Node {
        t_squared: 9.0,
        inverse_weight: 16971.059292194903,
    },
    Node {
        t_squared: 14.0625,
        inverse_weight: 2681172.556115378,
    },
];

/// Trapezoid with step 0.75, nodes half-way between the multiples of the step.
pub(super) const TRAPEZOID_FAST_BETWEEN: [Node; 6] = [
    Node {
        t_squared: 0.140625,
        inverse_weight: 2.410633986250322,
    },
    Node {
        t_squared: 1.265625,
        inverse_weight: 7.42527542102268,
    },
    Node {
        t_squared: 3.515625,
        inverse_weight: 70.44905170686901,
    },
    Node {
        t_squared: 6.890625,
        inverse_weight: 2058.8230792004338,
    },
    Node {
        t_squared: 11.390625,
        inverse_weight: 185329.34744493008,
    },
    Node {
        t_squared: 17.015625,
        inverse_weight: 51386691.555237405,
    },
];

/// Gauss-Hermite rule with 12 points.
pub(super) const HERMITE_12: [Node; 6] = [
    Node {
        t_squared: 0.09874701406848119,
        inverse_weight: 2.755129356838649,
    },
    Node {
        t_squared: 0.8983028345696177,
        inverse_weight: 6.030106321380377,
    },
    Node {
        t_squared: 2.5525898026681713,
        inverse_weight: 30.43707883671856,
    },
    Node {
        t_squared: 5.196152530054466,
        inverse_weight: 402.2123505334595,
    },
    Node {
        t_squared: 9.12424803753118,
        inverse_weight: 18321.12974043849,
    },
    Node {
        t_squared: 15.129959781108086,
        inverse_weight: 5908466.388063558,
    },
];

/// Gauss-Hermite rule with 8 points.
pub(super) const HERMITE_8: [Node; 4] = [
    Node {
        t_squared: 0.1453035215033171,
        inverse_weight: 2.375865423208765,
    },
    Node {
        t_squared: 1.3390972881263614,
        inverse_weight: 7.559089248087365,
    },
    Node {
        t_squared: 3.926963501358287,
        inverse_weight: 91.97785980422987,
    },
    Node {
        t_squared: 8.588635689012035,
        inverse_weight: 7869.560522450295,
    },
];

/// Gauss-Hermite rule with 6 points.
pub(super) const HERMITE_6: [Node; 3] = [
    Node {
        t_squared: 0.19016350919348812,
        inverse_weight: 2.167723119711217,
    },
    Node {
        t_squared: 1.7844927485432516,
        inverse_weight: 10.000783890411304,
    },
    Node {
        t_squared: 5.52534374226326,
        inverse_weight: 346.75339779824446,
    },
];

/// Gauss-Hermite rule with 4 points.
pub(super) const HERMITE_4: [Node; 2] = [
    Node {
        t_squared: 0.27525512860841095,
        inverse_weight: 1.9515080507338842,
    },
    Node {
        t_squared: 2.724744871391589,
        inverse_weight: 19.317938160132307,
    },
];

/// Gauss-Hermite rule with 2 points.
pub(super) const HERMITE_2: [Node; 1] = [Node {
    t_squared: 0.5,
    inverse_weight: 1.772453850905516,
}];

/// 2^r on |r| <= 1/2.
pub(super) const EXP_FULL: [f64; 11] = [
    1.0,
    0.69314718055995,
    0.24022650695910097,
    0.05550410866444772,
    0.009618129107606888,
    0.0013333558230164974,
    0.0001540353044173605,
    1.5252657260200837e-05,
    1.321544258792169e-06,
    1.0208690299958306e-07,
    7.072585949269223e-09,
];

/// sin(pi r/2)/r in powers of r², |r| <= 1/2.
pub(super) const SIN_FULL: [f64; 7] = [
    1.5707963267948966,
    -0.6459640975062443,
    0.07969262624604301,
    -0.004681754132340976,
    0.0001604411507421909,
    -3.59864335298231e-06,
    5.633933781537854e-08,
];

/// (1 - cos(pi r/2))/r² in powers of r², |r| <= 1/2.
pub(super) const COS_FULL: [f64; 6] = [
    1.233700550136169,
    -0.2536695079008304,
    0.02086348075319688,
    -0.0009192601014426249,
    2.5200703761965414e-05,
    -4.6632053886903437e-07,
];

/// 2^r on |r| <= 1/2.
pub(super) const EXP_FAST: [f64; 6] = [
    1.0000000754548972,
    0.6931471880262288,
    0.2402210748530834,
    0.05550357114219078,
    0.009676031918322054,
    0.0013390863364671234,
];

/// sin(pi r/2)/r in powers of r², |r| <= 1/2.
pub(super) const SIN_FAST: [f64; 4] = [
    1.5707963219532366,
    -0.6459634776648118,
    0.07968021764775542,
    -0.004602149212814176,
];

/// (1 - cos(pi r/2))/r² in powers of r², |r| <= 1/2.
pub(super) const COS_FAST: [f64; 3] = [
    1.2337001058690689,
    -0.2536375084500211,
    0.020521403578624132,
];
