// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/segment_regression.h"

#include <algorithm>

namespace hoverwright::ident {
namespace {

std::size_t at(Eigen::Index k) {
  return static_cast<std::size_t>(k);
}

/// Σ over pairs of `count` adjacent lines of what they share in noise power; 1.94 · count for many lines and
/// Hann.
double shared_by_adjacent(const NoiseCorrelation& correlation, Eigen::Index count) {
  double sum = static_cast<double>(count) * correlation.shared_power(0);
  for (int d = 1; d <= NoiseCorrelation::kLines && d < count; ++d) {
    sum += 2.0 * static_cast<double>(count - d) * correlation.shared_power(d);
  }
  return sum;
}

/// Columns: the regressor of line m and the part of the nuisance orthogonal to it, each of length one; a
/// column that is zero, or collinear to rounding, is left out.
Eigen::MatrixXcd orthonormal_basis(const Eigen::MatrixXcd& regressor, const Eigen::MatrixXcd& nuisance,
                                   Eigen::Index m) {
  Eigen::MatrixXcd basis(regressor.rows(), 0);
  const double length = regressor.col(m).norm();
  if (!(length > 0.0)) return basis;
  basis = regressor.col(m) / length;
  if (nuisance.size() == 0) return basis;
  Eigen::VectorXcd rest = nuisance.col(m);
  const double nuisance_length = rest.norm();
  // Twice: one Gram-Schmidt pass leaves rounding of the size of the whole where little is left.
  for (int pass = 0; pass < 2; ++pass) rest -= basis.col(0) * basis.col(0).dot(rest);
  if (rest.norm() > 1e-6 * nuisance_length) {
    basis.conservativeResize(Eigen::NoChange, 2);
    basis.col(1) = rest.normalized();
  }
  return basis;
}

}  // namespace

SegmentRegression regress_segments(const SegmentSpectra& spectra, const Eigen::MatrixXcd& regressor,
                                   const Eigen::MatrixXcd& nuisance, const NoiseCorrelation& correlation,
                                   const LineBand& band) {
  const Eigen::Index lines = spectra.lines();
  SegmentRegression result;
  result.energy = regressor.colwise().squaredNorm().transpose();
  result.a = result.b = Eigen::VectorXcd::Zero(lines);
  result.inflation = Eigen::VectorXd::Zero(lines);
  result.residual.resize(at(lines));
  result.degrees_of_freedom = Eigen::VectorXd::Zero(lines);
  for (Eigen::Index m = band.first; m <= band.last; ++m) {
    const Eigen::MatrixXcd basis = orthonormal_basis(regressor, nuisance, m);
    // tr(QΓ) and tr(QΓQΓ) for Q = I - B B*.
    Eigen::MatrixXcd gamma_basis(basis.rows(), basis.cols());
    for (Eigen::Index k = 0; k < basis.cols(); ++k) gamma_basis.col(k) = correlation.apply(basis.col(k), m);
    const Eigen::MatrixXcd inner = basis.adjoint() * gamma_basis;
    const double trace = static_cast<double>(basis.rows()) - inner.trace().real();
    const double trace_squared =
        correlation.shared_power(0) - 2.0 * gamma_basis.squaredNorm() + inner.squaredNorm();
    if (basis.cols() > 0) {
      result.a[m] = regressor.col(m).dot(spectra.output.col(m)) / result.energy[m];
      result.b[m] = regressor.col(m).dot(spectra.demand.col(m)) / result.energy[m];
      result.inflation[m] = inner(0, 0).real();
    }
    const Eigen::VectorXcd ey = spectra.output.col(m) - basis * (basis.adjoint() * spectra.output.col(m));
    const Eigen::VectorXcd eu = spectra.demand.col(m) - basis * (basis.adjoint() * spectra.demand.col(m));
    result.residual[at(m)] = {ey.squaredNorm() / trace, eu.squaredNorm() / trace, eu.dot(ey) / trace};
    result.degrees_of_freedom[m] = trace * trace / trace_squared;
  }
  return result;
}

PooledNoise pool_noise(const SegmentRegression& regression, const NoiseCorrelation& correlation,
                       const LineBand& band, double wanted) {
  PooledNoise pooled;
  pooled.spectrum.resize(regression.residual.size());
  pooled.degrees_of_freedom = Eigen::VectorXd::Zero(static_cast<Eigen::Index>(regression.residual.size()));
  const double alone = correlation.shared_power(0);
  for (Eigen::Index m = band.first; m <= band.last; ++m) {
    Eigen::Index low = m, high = m;
    double dof = regression.degrees_of_freedom[m];
    for (Eigen::Index p = 1; dof < wanted && (low > band.first || high < band.last); ++p) {
      low = std::max(band.first, m - p);
      high = std::min(band.last, m + p);
      const Eigen::Index count = high - low + 1;
      // `count` lines' mean degrees of freedom times count² / Σ of what pairs of lines share.
      dof = regression.degrees_of_freedom.segment(low, count).mean() * static_cast<double>(count * count) *
            alone / shared_by_adjacent(correlation, count);
    }
    PairNoise sum;
    for (Eigen::Index k = low; k <= high; ++k) {
      sum.aa += regression.residual[at(k)].aa;
      sum.bb += regression.residual[at(k)].bb;
      sum.ab += regression.residual[at(k)].ab;
    }
    const double count = static_cast<double>(high - low + 1);
    pooled.spectrum[at(m)] = {sum.aa / count, sum.bb / count, sum.ab / count};
    pooled.degrees_of_freedom[m] = dof;
  }
  return pooled;
}

}  // namespace hoverwright::ident
