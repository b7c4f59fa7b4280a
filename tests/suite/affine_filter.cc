// SPDX-License-Identifier: Apache-2.0
#include "suite/affine_filter.h"

#include <unsupported/Eigen/MatrixFunctions>

namespace steelyard::suite {

Eigen::MatrixXd step_noise(const Eigen::MatrixXd& A, int i, double step_s) {
  const auto n = A.rows();
  Eigen::MatrixXd block = Eigen::MatrixXd::Zero(2 * n, 2 * n);
  block.topLeftCorner(n, n) = -A * step_s;
  block(i, n + i) = step_s;
  block.bottomRightCorner(n, n) = A.transpose() * step_s;
  const Eigen::MatrixXd e = block.exp();
  return e.bottomRightCorner(n, n).transpose() * e.topRightCorner(n, n);
}

void discretise(const AffineLaw& law, double step_s, FilterModel& model) {
  const auto n = law.A.rows();
  const auto m = law.B.cols();
  // exp of [A B c; 0 0 0] holds the step's F, the inputs' part (held over the step) and the constant's.
  Eigen::MatrixXd block = Eigen::MatrixXd::Zero(n + m + 1, n + m + 1);
  block.topLeftCorner(n, n) = law.A * step_s;
  block.block(0, n, n, m) = law.B * step_s;
  block.block(0, n + m, n, 1) = law.c * step_s;
  const Eigen::MatrixXd e = block.exp();
  const Matrix F = e.topLeftCorner(n, n);
  const Matrix G = e.block(0, n, n, m);
  const Vector c = e.block(0, n + m, n, 1);
  model.move = [F, G, c](const Vector& input, Vector& x, Matrix& jacobian) {
    x = (F * x + G * input + c).eval();
    jacobian = F;
  };
  std::vector<Matrix> parts;
  for (int i = 0; i < n; ++i) parts.emplace_back(step_noise(law.A, i, step_s));
  model.noise = [parts](const Vector& unrest, const Matrix&, Matrix& Q) {
    Q.setZero(unrest.size(), unrest.size());
    for (int i = 0; i < unrest.size(); ++i)
      if (unrest[i] > 0.0) Q += unrest[i] * unrest[i] * parts[static_cast<std::size_t>(i)];
  };
}

}  // namespace steelyard::suite
