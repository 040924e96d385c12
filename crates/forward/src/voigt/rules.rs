//! Nodes, weights and polynomials of the Voigt kernel.
//!
//! Written by `reference-checks/voigt/make_rules.py` from 50-digit arithmetic; change the script, not this file.

#![allow(clippy::excessive_precision, clippy::unreadable_literal)]

use super::quadrature::Node;

/// Trapezoid with step 0.515625, nodes multiples of the step.
pub(super) const TRAPEZOID_FULL_ON: [Node; 12] = [
    Node {
        t_squared: 0.0,
        weight: 0.16412853506351707,
        weight_t_squared: 0.0,
    },
    Node {
        t_squared: 0.265869140625,
        weight: 0.2516219873658922,
        weight_t_squared: 0.06689852154332437,
    },
    Node {
        t_squared: 1.0634765625,
        weight: 0.11333187818317972,
        weight_t_squared: 0.12052579623191671,
    },
    Node {
        t_squared: 2.392822265625,
        weight: 0.02999332287854618,
        weight_t_squared: 0.07176869080386501,
    },
    Node {
        t_squared: 4.25390625,
        weight: 0.004664080933934271,
        weight_t_squared: 0.019840563035368835,
    },
    Node {
        t_squared: 6.646728515625,
        weight: 0.00042616381523488423,
        weight_t_squared: 0.0028325951830492488,
    },
    Node {
        t_squared: 9.5712890625,
        weight: 2.2880002328498415e-05,
        weight_t_squared: 0.00021899111603673142,
    },
    Node {
        t_squared: 13.027587890625,
        weight: 7.217795206086622e-07,
        weight_t_squared: 9.403046142382525e-06,
    },
    Node {
        t_squared: 17.015625,
        weight: 1.337895044791863e-08,
        weight_t_squared: 2.2765120371536543e-07,
    },
    Node {
        t_squared: 21.535400390625,
        weight: 1.4571643368952524e-10,
        weight_t_squared: 3.138061742997884e-09,
    },
    Node {
        t_squared: 26.5869140625,
        weight: 9.325325949042917e-13,
        weight_t_squared: 2.4793163961200528e-11,
    },
    Node {
        t_squared: 32.170166015625,
        weight: 3.5066183923375764e-15,
        weight_t_squared: 1.1280849583494386e-13,
    },
];

/// Trapezoid with step 0.515625, nodes half-way between the multiples of the step.
pub(super) const TRAPEZOID_FULL_BETWEEN: [Node; 12] = [
    Node {
        t_squared: 0.06646728515625,
        weight: 0.3071480155204902,
        weight_t_squared: 0.020415294732776722,
    },
    Node {
        t_squared: 0.59820556640625,
        weight: 0.18047485947644737,
        weight_t_squared: 0.10796106553519658,
    },
    Node {
        t_squared: 1.66168212890625,
        weight: 0.06230956360329351,
        weight_t_squared: 0.10353868829954015,
    },
    Node {
        t_squared: 3.25689697265625,
        weight: 0.012640425854139612,
        weight_t_squared: 0.041168564697433095,
    },
    Node {
        t_squared: 5.38385009765625,
        weight: 0.0015067378567924137,
        weight_t_squared: 0.008112050757434206,
    },
    Node {
        t_squared: 8.04254150390625,
        weight: 0.0001055316414466874,
        weight_t_squared: 0.0008487426063103363,
    },
    Node {
        t_squared: 11.23297119140625,
        weight: 4.343068558369078e-06,
        weight_t_squared: 4.878556399846213e-05,
    },
    Node {
        t_squared: 14.95513916015625,
        weight: 1.050218527159393e-07,
        weight_t_squared: 1.5706164222243059e-06,
    },
    Node {
        t_squared: 19.20904541015625,
        weight: 1.4922159047764099e-09,
        weight_t_squared: 2.8664043076607455e-08,
    },
    Node {
        t_squared: 23.99468994140625,
        weight: 1.2458124088622893e-11,
        weight_t_squared: 2.989288247580706e-10,
    },
    Node {
        t_squared: 29.31207275390625,
        weight: 6.111427142752728e-14,
        weight_t_squared: 1.7913859703856537e-12,
    },
    Node {
        t_squared: 35.16119384765625,
        weight: 1.761576969132298e-16,
        weight_t_squared: 6.19391492892275e-15,
    },
];

/// Trapezoid with step 0.75, nodes multiples of the step.
pub(super) const TRAPEZOID_FAST_ON: [Node; 6] = [
    Node {
        t_squared: 0.0,
        weight: 0.238732414637843,
        weight_t_squared: 0.0,
    },
    Node {
        t_squared: 0.5625,
        weight: 0.2720512591343683,
        weight_t_squared: 0.15302883326308217,
    },
    Node {
        t_squared: 2.25,
        weight: 0.05032442276122025,
        weight_t_squared: 0.11322995121274555,
    },
    Node {
        t_squared: 5.0625,
        weight: 0.003022216495948158,
        weight_t_squared: 0.015299971010737549,
    },
    Node {
        t_squared: 9.0,
        weight: 5.892384103919231e-05,
        weight_t_squared: 0.0005303145693527308,
    },
    Node {
        t_squared: 14.0625,
        weight: 3.7297114567249335e-07,
        weight_t_squared: 5.244906736019437e-06,
    },
];

/// Trapezoid with step 0.75, nodes half-way between the multiples of the step.
pub(super) const TRAPEZOID_FAST_BETWEEN: [Node; 6] = [
    Node {
        t_squared: 0.140625,
        weight: 0.41482863251068397,
        weight_t_squared: 0.05833527644681493,
    },
    Node {
        t_squared: 1.265625,
        weight: 0.13467513907548367,
        weight_t_squared: 0.17044822289240902,
    },
    Node {
        t_squared: 3.515625,
        weight: 0.014194655226317214,
        weight_t_squared: 0.04990308478002146,
    },
    Node {
        t_squared: 6.890625,
        weight: 0.00048571439192743104,
        weight_t_squared: 0.0033468757318749548,
    },
    Node {
        t_squared: 11.390625,
        weight: 5.395799498496298e-06,
        weight_t_squared: 6.14615286625594e-05,
    },
    Node {
        t_squared: 17.015625,
        weight: 1.9460291560608915e-08,
        weight_t_squared: 3.311290235859861e-07,
    },
];

/// Gauss-Hermite rule with 12 points.
pub(super) const HERMITE_12: [Node; 6] = [
    Node {
        t_squared: 0.09874701406848119,
        weight: 0.36295936432815695,
        weight_t_squared: 0.0358411534555995,
    },
    Node {
        t_squared: 0.8983028345696177,
        weight: 0.16583455526387564,
        weight_t_squared: 0.1489696510631314,
    },
    Node {
        t_squared: 2.5525898026681713,
        weight: 0.03285466405513344,
        weight_t_squared: 0.08386448043722212,
    },
    Node {
        t_squared: 5.196152530054466,
        weight: 0.002486248864993049,
        weight_t_squared: 0.012918928330178674,
    },
    Node {
        t_squared: 9.12424803753118,
        weight: 5.458178694039784e-05,
        weight_t_squared: 0.0004980177623758699,
    },
    Node {
        t_squared: 15.129959781108086,
        weight: 1.6924865681223586e-07,
        weight_t_squared: 2.560725370575694e-06,
    },
];

/// Gauss-Hermite rule with 8 points.
pub(super) const HERMITE_8: [Node; 4] = [
    Node {
        t_squared: 0.1453035215033171,
        weight: 0.42089926063633404,
        weight_t_squared: 0.061158144768601826,
    },
    Node {
        t_squared: 1.3390972881263614,
        weight: 0.13229106935773044,
        weight_t_squared: 0.17715061222027323,
    },
    Node {
        t_squared: 3.926963501358287,
        weight: 0.01087218165467699,
        weight_t_squared: 0.04269466053805369,
    },
    Node {
        t_squared: 8.588635689012035,
        weight: 0.00012707189901484312,
        weight_t_squared: 0.001091374246949415,
    },
];

/// Gauss-Hermite rule with 6 points.
pub(super) const HERMITE_6: [Node; 3] = [
    Node {
        t_squared: 0.19016350919348812,
        weight: 0.46131352796256536,
        weight_t_squared: 0.08772499931578974,
    },
    Node {
        t_squared: 1.7844927485432516,
        weight: 0.09999216171032298,
        weight_t_squared: 0.17843528748323553,
    },
    Node {
        t_squared: 5.52534374226326,
        weight: 0.00288389387486793,
        weight_t_squared: 0.015934504974852864,
    },
];

/// Gauss-Hermite rule with 4 points.
pub(super) const HERMITE_4: [Node; 2] = [
    Node {
        t_squared: 0.27525512860841095,
        weight: 0.5124242247547685,
        weight_t_squared: 0.14104739588693907,
    },
    Node {
        t_squared: 2.724744871391589,
        weight: 0.051765358792987826,
        weight_t_squared: 0.14104739588693907,
    },
];

/// Gauss-Hermite rule with 2 points.
pub(super) const HERMITE_2: [Node; 1] = [Node {
    t_squared: 0.5,
    weight: 0.5641895835477563,
    weight_t_squared: 0.28209479177387814,
}];

/// exp(r) on |r| <= ln(2)/2.
pub(super) const EXP_FULL: [f64; 11] = [
    1.0,
    1.0000000000000067,
    0.5000000000000006,
    0.16666666666554406,
    0.04166666666657314,
    0.008333333385667782,
    0.0013888888932488599,
    0.00019841170270440067,
    2.4801504346997686e-05,
    2.764018079620985e-06,
    2.7626357241447223e-07,
];

/// sin(r)/r in powers of r², |r| <= pi/4.
pub(super) const SIN_FULL: [f64; 7] = [
    1.0,
    -0.16666666666666616,
    0.008333333333320363,
    -0.000198412698286503,
    2.755731337640013e-06,
    -2.5050716974102745e-08,
    1.5894736651849094e-10,
];

/// (1 - cos r)/r² in powers of r², |r| <= pi/4.
pub(super) const COS_FULL: [f64; 6] = [
    0.49999999999999967,
    -0.04166666666663093,
    0.0013888888882127952,
    -2.480158262335195e-05,
    2.755585551192951e-07,
    -2.066550487012274e-09,
];

/// exp(r) on |r| <= ln(2)/2.
pub(super) const EXP_FAST: [f64; 6] = [
    1.0000000754548972,
    1.00000001077157,
    0.49998869378303396,
    0.16666505260408124,
    0.04191750724961526,
    0.008369148490856347,
];

/// sin(r)/r in powers of r², |r| <= pi/4.
pub(super) const SIN_FAST: [f64; 4] = [
    0.9999999969177036,
    -0.16666650673996775,
    0.00833203578559731,
    -0.000195039042508408,
];

/// (1 - cos r)/r² in powers of r², |r| <= pi/4.
pub(super) const COS_FAST: [f64; 3] = [
    0.4999998199453259,
    -0.04166141057392424,
    0.0013661166963481889,
];
