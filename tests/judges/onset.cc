// SPDX-License-Identifier: Apache-2.0
// How soon is an offset noticed, and how soon could it be? On the fault-free axis offsets of 4 to 20
// datasheet sd begin at random moments. Counted are the readings of that channel, the first faulty one
// included,
//   n: until its trust falls under 0.5;
//   m: until the log-likelihood ratio of the Kalman filter that knows time and size over the one that knows
//      nothing first passes log(fails_every / period), on the same readings. No test with that mean time
//      between false alarms can be much sooner (after Lorden 1971, Procedures for reacting to a change in
//      distribution).
// Demanded: mean n ≤ 1 + 1.5 · mean m for every channel and size.
// Beside m stands m', the same with strays in both filters' laws: what the engine's own prior lets be known.
//   onset [--onsets N] [--seed S] [--known 1: forgive what is known not to hold]
//         [--strays P] [--prior_readings N] [--fails_every_h H] [--jolts 0]   other declarations than the
//         defaults
#include <array>
#include <cmath>
#include <cstdio>

#include "engine/engine.h"
#include "judges/axis.h"
#include "judges/axis_filter.h"
#include "judges/judge.h"

namespace steelyard::judges {
namespace {

constexpr std::array<double, 5> kSizesSd{4.0, 6.0, 8.0, 12.0, 20.0};
constexpr double kMeanGapS = 4.0;  // between onsets; every one starts from a posterior that saw no fault
constexpr double kWarmUpS = 10.0;
constexpr int kLongest = 500;  // readings; an onset not noticed by then counts as this many
constexpr double kLostTrust = 0.5;
constexpr engine::TimeNs kBegin = 1'000'000'000;

/// Readings until something happened, over the onsets.
struct Delay {
  double sum = 0.0;
  int longest = 0;
  int never = 0;
  void add(int readings) {
    sum += readings;
    longest = std::max(longest, readings);
    never += readings >= kLongest;
  }
};

struct Case {
  Delay engine;
  Delay bound;
  Delay with_strays;
  int wronged = 0;  ///< onsets in which another channel's trust fell under 0.5 first or meanwhile
};

using Table = std::array<std::array<Case, kSizesSd.size()>, Axis::kChannels>;

/// The next moments' healthy readings, the same for all branches.
using Future = std::vector<std::array<double, Axis::kChannels>>;

struct Moment {
  engine::Engine engine;
  AxisFilter filter;
  engine::TimeNs t = 0;  ///< of the first faulty reading
};

double faulty(const std::array<double, Axis::kChannels>& healthy, int j, int channel, double offset) {
  const double y = healthy[static_cast<std::size_t>(j)];
  return j == channel ? Axis::as_read(j, y + offset) : y;
}

int noticed_by_engine(const Moment& from, const Future& future, int channel, double offset, bool& wronged) {
  engine::Engine engine = from.engine;
  engine::Estimate e;
  for (int i = 0; i < kLongest; ++i) {
    const engine::TimeNs t = from.t + i * Axis::kStepNs;
    for (int j = 0; j < Axis::kChannels; ++j)
      engine.read(t, j, faulty(future[static_cast<std::size_t>(i)], j, channel, offset),
                  engine::Quality::kGood);
    engine.estimate(t, engine::Detail::kBrief, e);
    for (int j = 0; j < Axis::kChannels; ++j)
      wronged |= j != channel && e.channels[static_cast<std::size_t>(j)].trust < kLostTrust;
    if (e.channels[static_cast<std::size_t>(channel)].trust < kLostTrust) return i + 1;
  }
  return kLongest;
}

int noticeable(const Moment& from, const Future& future, int channel, double offset, double log_ratio_wanted,
               double strays) {
  AxisFilter knows = from.filter;
  AxisFilter knows_nothing = from.filter;
  double log_ratio = 0.0;
  for (int i = 0; i < kLongest; ++i) {
    knows.predict();
    knows_nothing.predict();
    for (int j = 0; j < Axis::kChannels; ++j) {
      const double y = faulty(future[static_cast<std::size_t>(i)], j, channel, offset);
      log_ratio +=
          knows.update(j, j == channel ? y - offset : y, strays) - knows_nothing.update(j, y, strays);
    }
    if (log_ratio > log_ratio_wanted) return i + 1;
  }
  return kLongest;
}

void judge_onset(const Moment& from, const Future& future, double log_ratio, double strays, Table& table) {
  for (int channel = 0; channel < Axis::kChannels; ++channel) {
    const auto u = static_cast<std::size_t>(channel);
    for (std::size_t s = 0; s < kSizesSd.size(); ++s) {
      const double offset = kSizesSd[s] * Axis::kSd[u];
      Case& c = table[u][s];
      bool wronged = false;
      c.engine.add(noticed_by_engine(from, future, channel, offset, wronged));
      c.bound.add(noticeable(from, future, channel, offset, log_ratio, 0.0));
      c.with_strays.add(noticeable(from, future, channel, offset, log_ratio, strays));
      c.wronged += wronged;
    }
  }
}

void advance(Moment& moment, const Axis& axis) {
  moment.filter.predict();
  for (int j = 0; j < Axis::kChannels; ++j) {
    moment.engine.read(moment.t, j, axis.reading(j), engine::Quality::kGood);
    moment.filter.update(j, axis.reading(j), 0.0);
  }
  moment.t += Axis::kStepNs;
}

std::shared_ptr<const engine::Model> declared(const Numbers& options) {
  auto model = axis_model();
  model->jolt.on = options["jolts"] != 0.0;
  for (auto& c : model->channels) {
    c.strays = options["strays"];
    c.prior_readings = options["prior_readings"];
    c.fails_every_s = options["fails_every_h"] * 3600.0;
  }
  return model;
}

Table run(const Numbers& options) {
  const auto model = declared(options);
  const int onsets = options.whole("onsets");
  const auto seed = static_cast<std::uint64_t>(options.whole("seed"));
  const double log_ratio = std::log(model->channels[0].fails_every_s / Axis::kStepS);
  Axis axis(seed, false);
  Random random(seed + 1000);
  Moment moment{engine::Engine(model), AxisFilter(), kBegin};
  Table table{};
  double wait_s = kWarmUpS;
  for (int n = 0; n < onsets; ++n) {
    for (double s = 0.0; s < wait_s; s += Axis::kStepS) {
      axis.step();
      advance(moment, axis);
    }
    wait_s = random.exponential(kMeanGapS);
    Axis ahead = axis;
    Future future;
    for (int i = 0; i < kLongest; ++i) {
      ahead.step();
      future.push_back({ahead.reading(0), ahead.reading(1), ahead.reading(2), ahead.reading(3)});
    }
    judge_onset(moment, future, log_ratio, options["strays"], table);
  }
  return table;
}

// A jump of the speed sensor looks like a jolt until the position sensors have had their say, which the ratio
// without jolts does not allow for.
bool known_late(std::size_t channel, double size_sd) { return channel == 3 && size_sd >= 8.0; }

// A jump of the speed alone is what a jolt does, until the positions have had time to contradict.
bool looks_like_a_jolt(std::size_t channel, double size_sd) { return channel == 3 && size_sd <= 12.0; }

int print(const Table& table, int onsets, Bounds& bounds) {
  std::printf("%-8s %6s %10s %10s %8s %8s %10s %8s %8s %8s\n", "channel", "size", "n engine", "m ratio",
              "allowed", "n/m", "m' strays", "longest", "never", "wronged");
  for (std::size_t u = 0; u < table.size(); ++u) {
    for (std::size_t s = 0; s < kSizesSd.size(); ++s) {
      const Case& c = table[u][s];
      const double n = c.engine.sum / onsets;
      const double m = c.bound.sum / onsets;
      const double allowed = 1.0 + 1.5 * m;
      std::printf("%-8s %4g sd %10.2f %10.2f %8.2f %8.2f %10.2f %8d %8d %8d\n", Axis::kNames[u], kSizesSd[s],
                  n, m, allowed, n / m, c.with_strays.sum / onsets, c.engine.longest, c.engine.never,
                  c.wronged);
      const std::string what = format("onset on %s of %g sd", Axis::kNames[u], kSizesSd[s]);
      bounds.require(n <= allowed, what + format(": noticed after %.2f readings; at most %.2f", n, allowed),
                     known_late(u, kSizesSd[s]));
      const double with_strays = 1.0 + 1.5 * c.with_strays.sum / onsets;
      bounds.require(
          n <= with_strays || looks_like_a_jolt(u, kSizesSd[s]),
          what + format(": noticed after %.2f readings; at most %.2f with strays", n, with_strays));
    }
  }
  return bounds.exit_code();
}

}  // namespace
}  // namespace steelyard::judges

int main(int argc, char** argv) {
  using namespace steelyard::judges;
  const Numbers options(argc, argv,
                        {{"onsets", 50.0},
                         {"seed", 1.0},
                         {"known", 0.0},
                         {"strays", steelyard::engine::ChannelModel{}.strays},
                         {"prior_readings", steelyard::engine::ChannelModel{}.prior_readings},
                         {"fails_every_h", 720.0},
                         {"jolts", 1.0}});
  Bounds bounds(options["known"] != 0.0);
  std::printf("seed %d, %d onsets a channel and size\n", options.whole("seed"), options.whole("onsets"));
  return print(run(options), options.whole("onsets"), bounds);
}
