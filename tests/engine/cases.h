// SPDX-License-Identifier: Apache-2.0
// Random models and hypotheses for tests against dense formulas; the seed decides everything.
#pragma once

#include <Eigen/Dense>
#include <memory>

#include "engine/hypothesis.h"
#include "engine/likelihood.h"
#include "suite/random.h"

namespace steelyard::engine {

using suite::Random;

/// A model of `states` integrator-free states, `inputs` inputs and `channels` channels with random affine
/// laws; every second channel has a bias. Only the options' defaults, no strays.
[[nodiscard]] std::shared_ptr<Model> random_model(Random& random, int states, int inputs, int channels);

/// A symmetric positive definite matrix with variances near one.
[[nodiscard]] Eigen::MatrixXd random_covariance(Random& random, int n);

/// A model with a pool, for hypotheses that nothing else owns.
struct Scene {
  explicit Scene(std::shared_ptr<Model> m, int capacity = 64)
      : model(std::move(m)), layout(*model), pool(layout, capacity) {}
  std::shared_ptr<Model> model;
  Layout layout;
  Pool pool;

  /// Appends a hypothesis with random moments, in which the channels listed have an own number.
  Hypothesis& random_hypothesis(Random& random, const std::vector<std::pair<int, Condition>>& unsound = {});
};

[[nodiscard]] Eigen::VectorXd mean_of(const Hypothesis& h);
[[nodiscard]] Eigen::MatrixXd covariance_of(const Hypothesis& h);

/// The row h with which a channel reads z in a condition, biases and own numbers included, and the constant.
struct Row {
  Eigen::VectorXd on_z;
  double constant = 0.0;
};
[[nodiscard]] Row row_of(const Scene& scene, const Hypothesis& h, int channel);

/// A reading that nothing special is to be said of.
[[nodiscard]] Occasion plain_occasion(const Model& model, int channel, double value);

}  // namespace steelyard::engine
