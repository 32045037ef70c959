// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

Eigen::VectorXcd FrequencyResponse::response() const {
  return a.cwiseQuotient(b);
}

Eigen::VectorXd FrequencyResponse::variance() const {
  Eigen::VectorXd variance(points());
  for (Eigen::Index k = 0; k < points(); ++k) {
    variance[k] = noise[static_cast<std::size_t>(k)].variance_of_error(a[k] / b[k]) / std::norm(b[k]);
  }
  return variance;
}

}  // namespace hoverwright::ident
