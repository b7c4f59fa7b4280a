// SPDX-License-Identifier: Apache-2.0
#include "engine/cases.h"

#include "engine/repeats.h"

namespace steelyard::engine {
namespace {

AffineForm random_form(Random& random, int states, int inputs) {
  AffineForm form;
  for (int i = 0; i < states; ++i) form.on_states.push_back(random.normal());
  for (int i = 0; i < inputs; ++i) form.on_inputs.push_back(random.normal());
  form.constant = random.normal();
  return form;
}

}  // namespace

std::shared_ptr<Model> random_model(Random& random, int states, int inputs, int channels) {
  auto model = std::make_shared<Model>();
  for (int i = 0; i < states; ++i) {
    StateModel s;
    s.name = "state" + std::to_string(i);
    s.start = random.normal();
    s.start_sd = random.between(0.5, 2.0);
    s.unrest = random.between(0.01, 0.2);
    s.rate = random_form(random, states, inputs);
    model->states.push_back(s);
  }
  for (int i = 0; i < inputs; ++i) {
    InputModel u;
    u.name = "input" + std::to_string(i);
    u.sd = random.between(0.01, 0.2);
    u.lo = -10.0;
    u.hi = 10.0;
    model->inputs.push_back(u);
  }
  for (int j = 0; j < channels; ++j) {
    ChannelModel c;
    c.name = "channel" + std::to_string(j);
    c.reads = random_form(random, states, inputs);
    c.sd = random.between(0.1, 2.0);
    c.bias_sd = j % 2 == 1 ? 0.3 : 0.0;
    c.lo = -1e6;
    c.hi = 1e6;
    c.strays = 0.0;
    model->channels.push_back(c);
  }
  return model;
}

Eigen::MatrixXd random_covariance(Random& random, int n) {
  Eigen::MatrixXd root(n, n + 2);
  for (int i = 0; i < n; ++i)
    for (int k = 0; k < n + 2; ++k) root(i, k) = random.normal() / std::sqrt(n + 2.0);
  Eigen::MatrixXd p = root * root.transpose();
  return 0.5 * (p + p.transpose());
}

Hypothesis& Scene::random_hypothesis(Random& random, const std::vector<std::pair<int, Condition>>& unsound) {
  Hypothesis& h = pool.append();
  h.log_weight = random.between(-5.0, 0.0);
  h.conditions = {};
  h.mode = Mode::kUsual;
  h.own_at.fill(-1);
  h.dim = layout.fixed;
  for (int j = 0; j < layout.channels; ++j) {
    h.noise[j] = {random.between(2.0, 9.0), random.between(2.0, 9.0)};
    h.walk[j] = {1.0, 1.0};
    h.since[j] = 0.0;
  }
  const std::vector<double> none(static_cast<std::size_t>(layout.max_dim), 0.0);
  for (const auto& [channel, condition] : unsound) {
    h.conditions.set(channel, condition);
    if (has_own(condition)) add_own(h, channel, 0.0, 1.0, none.data());
  }
  const Eigen::MatrixXd p = random_covariance(random, h.dim);
  for (int i = 0; i < h.dim; ++i) {
    h.mean[i] = random.normal();
    for (int k = 0; k < h.dim; ++k) h.p(i, k) = p(i, k);
  }
  return h;
}

Eigen::VectorXd mean_of(const Hypothesis& h) { return Eigen::Map<const Eigen::VectorXd>(h.mean, h.dim); }

Eigen::MatrixXd covariance_of(const Hypothesis& h) {
  return Eigen::Map<const Eigen::Matrix<double, -1, -1, Eigen::RowMajor>>(h.cov, h.dim, h.dim);
}

Row row_of(const Scene& scene, const Hypothesis& h, int channel) {
  const auto j = static_cast<std::size_t>(channel);
  const auto& form = std::get<AffineForm>(scene.model->channels[j].reads);
  Row row{Eigen::VectorXd::Zero(h.dim), form.constant};
  const Condition condition = h.conditions.of(channel);
  if (has_own(condition)) row.on_z(h.own_at[j]) = 1.0;
  if (condition == Condition::kStuck) {
    row.constant = 0.0;
    return row;
  }
  for (int i = 0; i < scene.layout.states; ++i) row.on_z(i) = form.on_states[static_cast<std::size_t>(i)];
  for (int i = scene.layout.states; i < scene.layout.core; ++i)
    row.on_z(i) = form.on_inputs[static_cast<std::size_t>(i - scene.layout.states)];
  if (scene.layout.bias_at[j] >= 0) row.on_z(scene.layout.bias_at[j]) = 1.0;
  return row;
}

Occasion plain_occasion(const Model& model, int channel, double value) {
  const auto& c = model.channels[static_cast<std::size_t>(channel)];
  Occasion o;
  o.channel = channel;
  o.value = value;
  o.gap_s = 1.0;
  o.last_value = value + 1.0;
  o.span = c.hi - c.lo;
  o.resolution = effective_resolution(c);
  o.regular = 1.0 - c.strays;
  o.elsewhere = 1.0 / o.span;
  return o;
}

}  // namespace steelyard::engine
