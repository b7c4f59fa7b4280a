// SPDX-License-Identifier: Apache-2.0
// Real readings with one injected fault at a time: when was it noticed, was the right channel blamed, and how
// far did the estimate stray from that of the same readings without the fault?
//   real_faults [--set 0|1|2|3] [--whole 1] [--victims N] [--known 1] [--json FILE]
// --set 0: all, 1: thermometers, 2: wind, 3: wind as one vector channel. --whole 0 stops the fault-free run
// where the faults begin to be done.
#include <algorithm>
#include <cmath>
#include <cstdio>
#include <cstring>
#include <exception>
#include <fstream>
#include <span>
#include <string>
#include <vector>

#include "engine/engine.h"
#include "judges/field.h"
#include "judges/judge.h"

namespace steelyard::judges {
namespace {

constexpr double kLostTrust = 0.5;

struct Outcome {
  std::string set;
  std::string channel;
  std::string fault;
  int noticed = -1;           ///< readings until trust < 0.5, the first faulty one included; −1: never
  double blamed_share = 0.0;  ///< of the time after that: the faulty channel under 0.5
  double wronged_share =
      0.0;                ///< of the spell: how much more than without the fault another one is under 0.5
  std::string wronged;    ///< the worst such channel
  double error = 0.0;     ///< rms difference of the first state from the fault-free run's, in its unit
  double error_sd = 0.0;  ///< the same in the fault-free run's sd
  double told_sd = 0.0;   ///< of the engine that gets no readings of the faulty channel
  double plain_sd = 0.0;  ///< of a plain Kalman filter from its own fault-free run
  double covered = 0.0;   ///< share of the spell in which 1.96 stated sd of both runs bridge the difference
};

struct Track {
  std::vector<double> mean;
  std::vector<double> sd;
  std::vector<std::vector<double>> trust;
};

engine::TimeNs time_of(const Field& field, std::size_t row) {
  return 1'000'000'000 +
         static_cast<engine::TimeNs>(std::llround(static_cast<double>(row) * field.period_days * 86400e9));
}

std::shared_ptr<const engine::Model> plain(const engine::Model& model) {
  auto out = std::make_shared<engine::Model>(model);
  out->options.learn_precision = false;
  out->options.use_repeats = false;
  out->options.conditions = {true, false, false, false, false, false};
  for (auto& c : out->channels) c.strays = 0.0;
  return out;
}

constexpr int kNobody = -1;

/// Reads one moment; the channel `silent` gives nothing.
void read(engine::Engine& engine, const Field& field, engine::TimeNs t, const std::vector<double>& shown,
          int silent) {
  std::vector<double> values;
  for (std::size_t j = 0; j < shown.size(); ++j) values.push_back(as_read(field, j, shown[j]));
  if (field.one_vector) {
    if (silent == kNobody) engine.read(t, 0, values, engine::Quality::kGood);
    return;
  }
  for (int j = 0; j < static_cast<int>(values.size()); ++j)
    if (j != silent) engine.read(t, j, values[static_cast<std::size_t>(j)], engine::Quality::kGood);
}

void step(engine::Engine& engine, const Field& field, std::size_t row, const std::vector<double>& shown,
          int silent, engine::Estimate& e, Track& track) {
  const engine::TimeNs t = time_of(field, row);
  read(engine, field, t, shown, silent);
  engine.estimate(t, engine::Detail::kBrief, e);
  track.mean.push_back(e.states[0].mean);
  track.sd.push_back(e.states[0].sd);
  track.trust.emplace_back();
  for (const auto& c : e.channels) track.trust.back().push_back(c.trust);
}

Track spoiled(engine::Engine engine, const Field& field, const Fault& fault, int victim, bool told = false) {
  const auto v = static_cast<std::size_t>(victim);
  const auto rows = static_cast<std::size_t>(fault.days / field.period_days);
  Spoiler spoiler(fault, field.shown[field.onset - 1][v], 7);
  Track track;
  engine::Estimate e;
  for (std::size_t i = 0; i < rows && field.onset + i < field.shown.size(); ++i) {
    std::vector<double> shown = field.shown[field.onset + i];
    shown[v] = spoiler.spoil(shown[v], static_cast<double>(i + 1) * field.period_days);
    step(engine, field, field.onset + i, shown, told ? victim : kNobody, e, track);
  }
  return track;
}

double rms_between(const Track& track, const Track& base, std::size_t at) {
  double sum = 0.0;
  for (std::size_t i = 0; i < track.mean.size(); ++i) sum += std::pow(track.mean[i] - base.mean[at + i], 2);
  return std::sqrt(sum / static_cast<double>(track.mean.size()));
}

double mean_sd(const Track& base, std::size_t at, std::size_t count) {
  double sum = 0.0;
  for (std::size_t i = 0; i < count; ++i) sum += base.sd[at + i];
  return sum / static_cast<double>(count);
}

Outcome judge_track(const Field& field, const Track& track, const Track& base, int victim) {
  Outcome out;
  const std::size_t v = field.one_vector ? 0 : static_cast<std::size_t>(victim);
  const std::size_t n = track.mean.size();
  std::vector<double> under(field.model->channels.size());
  double after = 0.0;
  for (std::size_t i = 0; i < n; ++i) {
    for (std::size_t j = 0; j < under.size(); ++j) {
      under[j] += track.trust[i][j] < kLostTrust;
      if (j != v) under[j] -= base.trust[field.onset + i][j] < kLostTrust;
    }
    const double bridged = 1.96 * std::hypot(track.sd[i], base.sd[field.onset + i]);
    out.covered += std::fabs(track.mean[i] - base.mean[field.onset + i]) < bridged;
    if (out.noticed < 0 && track.trust[i][v] < kLostTrust) out.noticed = static_cast<int>(i) + 1;
    after += out.noticed >= 0;
  }
  out.blamed_share = after > 0.0 ? under[v] / after : 0.0;
  for (std::size_t j = 0; j < under.size(); ++j) {
    if (j == v || under[j] / static_cast<double>(n) < out.wronged_share) continue;
    out.wronged_share = under[j] / static_cast<double>(n);
    out.wronged = field.model->channels[j].name;
  }
  out.covered /= static_cast<double>(n);
  out.error = rms_between(track, base, field.onset);
  out.error_sd = out.error / mean_sd(base, field.onset, n);
  return out;
}

struct Base {
  Track track;
  engine::Engine at_onset;
};

Base fault_free(const Field& field, const std::shared_ptr<const engine::Model>& model, std::size_t rows) {
  engine::Engine engine(model);
  Base base{{}, engine};
  engine::Estimate e;
  for (std::size_t i = 0; i < rows; ++i) {
    if (i == field.onset) base.at_onset = engine;
    step(engine, field, i, field.shown[i], kNobody, e, base.track);
  }
  return base;
}

void print_fault_free(const Field& field, const Track& track) {
  std::printf("%s, %zu readings a channel as they are; share of them with trust under 0.5:",
              field.name.c_str(), track.mean.size());
  for (std::size_t j = 0; j < field.model->channels.size(); ++j) {
    double under = 0.0;
    for (std::size_t i = field.first; i < track.trust.size(); ++i) under += track.trust[i][j] < kLostTrust;
    std::printf(" %s %.2f%%", field.model->channels[j].name.c_str(),
                100.0 * under / static_cast<double>(track.trust.size() - field.first));
  }
  std::printf("\n  %-10s %-20s %8s %12s %8s %18s %9s %7s %7s %7s %7s\n", "channel", "fault", "noticed", "in",
              "blamed", "other under 0.5", "error", "in sd", "told", "plain", "cover");
}

void print(const Field& field, const Outcome& o) {
  const double days = o.noticed * field.period_days;
  const std::string in = o.noticed < 0 ? "never"
                         : days < 1.0  ? format("%.0f s", days * 86400)
                                       : format("%.0f d", days);
  std::printf("  %-10s %-20s %8d %12s %7.1f%% %9s %7.1f%% %9.4f %7.2f %7.2f %7.2f %7.3f\n", o.channel.c_str(),
              o.fault.c_str(), o.noticed, in.c_str(), 100.0 * o.blamed_share, o.wronged.c_str(),
              100.0 * o.wronged_share, o.error, o.error_sd, o.told_sd, o.plain_sd, o.covered);
}

// Asserted for the first victim alone (see field.h), and not for the vector: it has one trust for all its
// parts.
void require(const Outcome& o, Bounds& bounds) {
  const std::string what = o.set + ", " + o.fault + " on " + o.channel + ": ";
  bounds.require(o.noticed >= 0, what + "never noticed");
  bounds.require(
      o.blamed_share >= 0.9 || o.noticed < 0,
      what + format("blamed for %.0f %% of the time after; at least 90 %%", 100.0 * o.blamed_share));
  // Of two thermometers, one of which drifts slowly, it can be either for a while: 7 % today.
  const bool either = o.set == "thermometers" && o.fault.starts_with("drift");
  bounds.require(o.wronged_share <= 0.05,
                 what + format("%s under trust 0.5 for %.0f %% of it; at most 5 %%", o.wronged.c_str(),
                               100.0 * o.wronged_share),
                 either);
  bounds.require(o.error_sd <= 1.2 * o.told_sd + 0.3,
                 what + format("error %.2f sd; at most 1.2 times that without the channel (%.2f) and 0.3 sd",
                               o.error_sd, o.told_sd));
}

struct Extent {
  bool whole = false;  ///< run the fault-free readings to their end
  int victims = 2;     ///< channels that get faults
};

void judge_field(const Field& field, const Extent& extent, Bounds& bounds, std::vector<Outcome>& all) {
  std::size_t rows = field.onset;
  for (const auto& f : field.faults)
    rows = std::max(rows, field.onset + static_cast<std::size_t>(f.days / field.period_days));
  if (extent.whole) rows = field.shown.size();
  const Base base = fault_free(field, field.model, rows);
  const Base simple = fault_free(field, plain(*field.model), rows);
  print_fault_free(field, base.track);
  const auto victims = std::min(field.victims.size(), static_cast<std::size_t>(std::max(1, extent.victims)));
  for (const int victim : std::span(field.victims).first(victims)) {
    for (const auto& fault : field.faults) {
      const Track track = spoiled(base.at_onset, field, fault, victim);
      Outcome o = judge_track(field, track, base.track, victim);
      const double sd = mean_sd(base.track, field.onset, track.mean.size());
      o.plain_sd =
          rms_between(spoiled(simple.at_onset, field, fault, victim), simple.track, field.onset) / sd;
      o.told_sd =
          rms_between(spoiled(base.at_onset, field, fault, victim, true), base.track, field.onset) / sd;
      o.set = field.name;
      o.channel = sensor_name(field, static_cast<std::size_t>(victim));
      o.fault = fault.label;
      print(field, o);
      if (!field.one_vector && victim == field.victims.front()) require(o, bounds);
      all.push_back(std::move(o));
    }
  }
}

bool write_json(const std::string& path, const std::vector<Outcome>& all) {
  std::ofstream file(path);
  file << "[\n";
  for (std::size_t i = 0; i < all.size(); ++i) {
    const Outcome& o = all[i];
    file << format(
                "  {\"set\": \"%s\", \"channel\": \"%s\", \"fault\": \"%s\", \"noticed_after_readings\": %d, "
                "\"blamed_share\": %.4f, \"other\": \"%s\", \"other_under_share\": %.4f, ",
                o.set.c_str(), o.channel.c_str(), o.fault.c_str(), o.noticed, o.blamed_share,
                o.wronged.c_str(), o.wronged_share)
         << format(
                "\"error\": %.6g, \"error_in_sd\": %.4f, \"told_error_in_sd\": %.4f, "
                "\"plain_filter_error_in_sd\": %.4f, \"covered\": %.4f}%s\n",
                o.error, o.error_sd, o.told_sd, o.plain_sd, o.covered, i + 1 < all.size() ? "," : "");
  }
  file << "]\n";
  file.close();
  if (!file) std::fprintf(stderr, "%s: could not be written\n", path.c_str());
  return static_cast<bool>(file);
}

/// Takes `--json FILE` out of the arguments.
std::string json_path(int& argc, char** argv) {
  std::string path;
  int kept = 1;
  for (int i = 1; i < argc; ++i) {
    if (std::strcmp(argv[i], "--json") == 0 && i + 1 < argc) {
      path = argv[++i];
    } else {
      argv[kept++] = argv[i];
    }
  }
  argc = kept;
  return path;
}

}  // namespace
}  // namespace steelyard::judges

int main(int argc, char** argv) try {
  using namespace steelyard::judges;
  const std::string path = json_path(argc, argv);
  const Numbers options(argc, argv, {{"set", 0.0}, {"whole", 0.0}, {"victims", 2.0}, {"known", 0.0}});
  Bounds bounds(options["known"] != 0.0);
  std::vector<Outcome> all;
  const int set = options.whole("set");
  const Extent extent{options["whole"] != 0.0, options.whole("victims")};
  if (set == 0 || set == 1) judge_field(thermometers(), extent, bounds, all);
  if (set == 0 || set == 2) judge_field(wind(), extent, bounds, all);
  if (set == 0 || set == 3) judge_field(wind_vector(), extent, bounds, all);
  if (!path.empty() && !write_json(path, all)) return 1;
  return bounds.exit_code();
} catch (const std::exception& e) {
  std::fprintf(stderr, "real_faults: %s\n", e.what());
  return 2;
}
