//! Sources of the methods, numbered in the order in which the page first cites them.

use super::blocks::Span;

/// A published method.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Source {
    Kong,
    Hesterberg,
    VeachGuibas,
    OwenZhou,
    Cappe,
    Douc,
    AssarafCaffarel,
    Mira,
    ZhangStephens,
    Cornuet,
    LiuRubin,
    PeelMcLachlan,
    Vehtari,
    HasoferLind,
    DerKiureghianDakessian,
    PapaioannouGeyerStraub,
    FayFeuer,
    Rosenblatt,
    LiuDerKiureghian,
    Marin,
    SquareRootRule,
}

impl Source {
    fn text(self) -> &'static str {
        match self {
            Self::Kong => {
                "A. Kong, A note on importance sampling using standardized weights, Technical Report 348, Department of Statistics, University of Chicago, 1992."
            }
            Self::Hesterberg => {
                "T. Hesterberg, Weighted average importance sampling and defensive mixture distributions, Technometrics 37 (1995) 185–194."
            }
            Self::VeachGuibas => {
                "E. Veach, L. J. Guibas, Optimally combining sampling techniques for Monte Carlo rendering, SIGGRAPH 1995, 419–428."
            }
            Self::OwenZhou => {
                "A. Owen, Y. Zhou, Safe and effective importance sampling, Journal of the American Statistical Association 95 (2000) 135–143."
            }
            Self::Cappe => {
                "O. Cappé, R. Douc, A. Guillin, J.-M. Marin, C. P. Robert, Adaptive importance sampling in general mixture classes, Statistics and Computing 18 (2008) 447–459."
            }
            Self::Douc => {
                "R. Douc, A. Guillin, J.-M. Marin, C. P. Robert, Minimum variance importance sampling via population Monte Carlo, ESAIM: Probability and Statistics 11 (2007) 427–447."
            }
            Self::AssarafCaffarel => {
                "R. Assaraf, M. Caffarel, Zero-variance principle for Monte Carlo algorithms, Physical Review Letters 83 (1999) 4682–4685."
            }
            Self::Mira => {
                "A. Mira, R. Solgi, D. Imparato, Zero variance Markov chain Monte Carlo for Bayesian estimators, Statistics and Computing 23 (2013) 653–662."
            }
            Self::ZhangStephens => {
                "J. Zhang, M. A. Stephens, A new and efficient estimation method for the generalized Pareto distribution, Technometrics 51 (2009) 316–325."
            }
            Self::Cornuet => {
                "J.-M. Cornuet, J.-M. Marin, A. Mira, C. P. Robert, Adaptive multiple importance sampling, Scandinavian Journal of Statistics 39 (2012) 798–812."
            }
            Self::LiuRubin => {
                "C. Liu, D. B. Rubin, ML estimation of the t distribution using EM and its extensions, ECM and ECME, Statistica Sinica 5 (1995) 19–39."
            }
            Self::PeelMcLachlan => {
                "D. Peel, G. J. McLachlan, Robust mixture modelling using the t distribution, Statistics and Computing 10 (2000) 339–348."
            }
            Self::Vehtari => {
                "A. Vehtari, D. Simpson, A. Gelman, Y. Yao, J. Gabry, Pareto smoothed importance sampling, Journal of Machine Learning Research 25 (2024) no. 72."
            }
            Self::HasoferLind => {
                "A. M. Hasofer, N. C. Lind, Exact and invariant second-moment code format, Journal of the Engineering Mechanics Division 100 (1974) 111–121."
            }
            Self::DerKiureghianDakessian => {
                "A. Der Kiureghian, T. Dakessian, Multiple design points in first and second-order reliability, Structural Safety 20 (1998) 37–49."
            }
            Self::PapaioannouGeyerStraub => {
                "I. Papaioannou, S. Geyer, D. Straub, Improved cross entropy-based importance sampling with a flexible mixture model, Reliability Engineering & System Safety 191 (2019) 106564."
            }
            Self::FayFeuer => {
                "M. P. Fay, E. J. Feuer, Confidence intervals for directly standardized rates: a method based on the gamma distribution, Statistics in Medicine 16 (1997) 791–801."
            }
            Self::Rosenblatt => {
                "M. Rosenblatt, Remarks on a multivariate transformation, Annals of Mathematical Statistics 23 (1952) 470–472."
            }
            Self::LiuDerKiureghian => {
                "P.-L. Liu, A. Der Kiureghian, Multivariate distribution models with prescribed marginals and covariances, Probabilistic Engineering Mechanics 1 (1986) 105–112."
            }
            Self::SquareRootRule => {
                "A. B. Owen, Y. Zhou, The square root rule for adaptive importance sampling, ACM Transactions on Modeling and Computer Simulation 30 (2020) article 13."
            }
            Self::Marin => {
                "J.-M. Marin, P. Pudlo, M. Sedki, Consistency of adaptive importance sampling and recycling schemes, Bernoulli 25 (2019) 1977–1998."
            }
        }
    }
}

/// Hands out numbers.
#[derive(Debug, Default)]
pub(crate) struct Bibliography(Vec<Source>);

impl Bibliography {
    /// The numbers of sources, new ones at the end of the list.
    pub(crate) fn cite(&mut self, sources: &[Source]) -> Span {
        let number = |source: &Source| match self.0.iter().position(|known| known == source) {
            Some(place) => place + 1,
            None => {
                self.0.push(*source);
                self.0.len()
            }
        };
        Span::Cite(sources.iter().map(number).collect())
    }

    /// Every source that was cited, in order.
    pub(crate) fn listed(&self) -> Vec<&'static str> {
        self.0.iter().map(|source| source.text()).collect()
    }
}
