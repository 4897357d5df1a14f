//! Every published source, once. An entry that cites none of these is common practice and says so.

use super::entry::Citation;

pub(super) const MYHRE_1998: Citation = Citation {
    key: "Myhre et al. (1998)",
    reference: "Myhre, G., Highwood, E. J., Shine, K. P. and Stordal, F. (1998): New estimates of radiative forcing due to well \
                mixed greenhouse gases. Geophysical Research Letters 25, 2715–2718, doi:10.1029/98GL01908",
};

pub(super) const GEOFFROY_2013A: Citation = Citation {
    key: "Geoffroy et al. (2013a)",
    reference: "Geoffroy, O., Saint-Martin, D., Olivié, D. J. L., Voldoire, A., Bellon, G. and Tytéca, S. (2013): Transient \
                climate response in a two-layer energy-balance model. Part I: Analytical solution and parameter calibration \
                using CMIP5 AOGCM experiments. Journal of Climate 26, 1841–1857, doi:10.1175/JCLI-D-12-00195.1",
};

pub(super) const GEOFFROY_2013B: Citation = Citation {
    key: "Geoffroy et al. (2013b)",
    reference: "Geoffroy, O., Saint-Martin, D., Bellon, G., Voldoire, A., Olivié, D. J. L. and Tytéca, S. (2013): Transient \
                climate response in a two-layer energy-balance model. Part II: Representation of the efficacy of deep-ocean \
                heat uptake and validation for CMIP5 AOGCMs. Journal of Climate 26, 1859–1876, doi:10.1175/JCLI-D-12-00196.1",
};

pub(super) const AITKEN_1936: Citation = Citation {
    key: "Aitken (1936)",
    reference: "Aitken, A. C. (1936): On least squares and linear combination of observations. Proceedings of the Royal \
                Society of Edinburgh 55, 42–48, doi:10.1017/S0370164600014346",
};

pub(super) const PRAIS_WINSTEN_1954: Citation = Citation {
    key: "Prais and Winsten (1954)",
    reference: "Prais, S. J. and Winsten, C. B. (1954): Trend estimators and serial correlation. Cowles Commission Discussion \
                Paper 383",
};

pub(super) const DURBIN_WATSON_1950: Citation = Citation {
    key: "Durbin and Watson (1950)",
    reference: "Durbin, J. and Watson, G. S. (1950): Testing for serial correlation in least squares regression: I. \
                Biometrika 37, 409–428, doi:10.1093/biomet/37.3-4.409",
};

pub(super) const WICHURA_1988: Citation = Citation {
    key: "Wichura (1988)",
    reference: "Wichura, M. J. (1988): Algorithm AS 241: The percentage points of the normal distribution. Applied Statistics \
                37, 477–484, doi:10.2307/2347330",
};
