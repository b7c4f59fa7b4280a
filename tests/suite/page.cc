// SPDX-License-Identifier: Apache-2.0
// The table as a page: a chart and a sortable table for each machine, in one file that needs no network.
#include <algorithm>
#include <array>
#include <cmath>
#include <cstdio>
#include <fstream>
#include <stdexcept>

#include "suite/table.h"

namespace steelyard::suite {
namespace {

constexpr const char* kHead = R"(<!doctype html>
<html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width">
<title>Fault table</title><style>
:root{color-scheme:light dark;--ink:#1d2433;--paper:#fbfaf7;--line:#d8d4ca;--bar:#4d7ea8;
--broken:#b4472f;--bound:#8a8170}
@media (prefers-color-scheme:dark){:root{--ink:#e4e1d8;--paper:#171a20;--line:#3a3f49;--bar:#7fb0d8;
--broken:#e58668;--bound:#a59c88}}
body{margin:2rem;max-width:90rem;background:var(--paper);color:var(--ink);font:15px/1.45 sans-serif}
h2{margin:2.5rem 0 .3rem}p{margin:.3rem 0;max-width:60rem}
.wide{overflow-x:auto}table{border-collapse:collapse;margin-top:.8rem;font-size:13px}
th,td{padding:.2rem .55rem;border-bottom:1px solid var(--line);text-align:right;white-space:nowrap}
th:first-child,td:first-child,td:last-child,th:last-child{text-align:left}
th button{all:unset;cursor:pointer;font-weight:600}th button:focus-visible{outline:2px solid var(--bar)}
tr.broken td:first-child,td:last-child{color:var(--broken)}
svg{display:block;margin-top:.6rem}svg text{fill:var(--ink);font:11px sans-serif}
</style></head><body><h1>Fault table</h1>
)";

constexpr const char* kScript = R"(<script>
for (const table of document.querySelectorAll('table'))
  table.querySelectorAll('th button').forEach((button, column) => button.addEventListener('click', () => {
    const body = table.tBodies[0], up = button.dataset.up !== '1';
    button.dataset.up = up ? '1' : '0';
    const key = row => { const c = row.cells[column];
      return c.dataset.v === undefined ? c.textContent : +c.dataset.v; };
    [...body.rows].sort((a, b) => { const x = key(a), y = key(b);
      return (x < y ? -1 : x > y ? 1 : 0) * (up ? 1 : -1); }).forEach(row => body.append(row));
  }));
</script></body></html>
)";

constexpr std::array<const char*, 15> kColumns{
    "row",         "to told", "to informed", "fixed",      "gated",     "mid value", "variational", "cover",
    "told covers", "NEES",    "notice, s",   "wronged, %", "mid trust", "µs",        "breaks"};

std::string escaped(const std::string& text) {
  std::string out;
  for (const char c : text) {
    if (c == '<') {
      out += "&lt;";
    } else if (c == '>') {
      out += "&gt;";
    } else if (c == '&') {
      out += "&amp;";
    } else if (c == '"') {
      out += "&quot;";
    } else {
      out += c;
    }
  }
  return out;
}

std::string number(double value, int digits) {
  std::array<char, 64> text{};
  std::snprintf(text.data(), text.size(), "%.*f", digits, value);
  return text.data();
}

std::string cell(double value, int digits, const char* before = "") {
  return "<td data-v=\"" + number(value, 6) + "\">" + before + number(value, digits) + "</td>";
}

std::string table_row(const Result& r) {
  const auto other = [&](Reference which) { return r.others[static_cast<std::size_t>(which)]; };
  const auto broken = breaches(r);
  std::string out = broken.empty() ? "<tr>" : "<tr class=\"broken\">";
  out += "<td>" + escaped(r.row->name) + "</td>" + cell(r.to_told, 3) + cell(r.to_informed, 3);
  for (const auto which : {Reference::kFixed, Reference::kGated, Reference::kMedian, Reference::kVariational})
    out += cell(other(which), 2);
  out += cell(r.coverage, 3) + cell(r.told_coverage, 3) + cell(r.nees, 2);
  const bool faulty = !r.row->faults.empty();
  out += faulty ? cell(r.notice_s, 1, r.always_noticed ? "" : "&gt; ") : "<td data-v=\"-1\"></td>";
  out += cell(100.0 * r.wronged, 3);
  out += faulty ? cell(r.mid_trust, 3) : "<td data-v=\"-1\"></td>";
  return out + cell(r.us_per_reading, 1) + "<td>" + escaped(joined(broken)) + "</td></tr>\n";
}

// Heights are logarithmic from half to four times the told filter's error.
class Chart {
 public:
  explicit Chart(std::size_t bars) : width_(kLeft + kPitch * static_cast<double>(bars) + 10.0) {}

  void bar(std::size_t i, const Result& r) {
    const double x = kLeft + kPitch * static_cast<double>(i);
    const double top = std::min(y(r.to_told), y(1.0));
    const double height = std::max(1.0, std::fabs(y(r.to_told) - y(1.0)));
    out_ += "<rect x=\"" + number(x, 1) + "\" y=\"" + number(top, 1) + "\" width=\"" + number(kPitch - 3, 1) +
            "\" height=\"" + number(height, 1) + "\" fill=\"var(--" +
            (breaches(r).empty() ? "bar" : "broken") + ")\"><title>" + escaped(r.row->name) + ": " +
            number(r.to_told, 3) + "</title></rect>\n";
    if (const double bound = error_bound(r.row->what); std::isfinite(bound))
      out_ += "<path d=\"M" + number(x - 1, 1) + " " + number(y(bound), 1) + "h" + number(kPitch - 1, 1) +
              "\" stroke=\"var(--bound)\"/>\n";
  }

  [[nodiscard]] std::string text() const {
    std::string svg = "<svg role=\"img\" aria-label=\"error over the told filter's, by row\" width=\"" +
                      number(width_, 0) + "\" height=\"" + number(kHeight + 16, 0) + "\">\n";
    for (const double v : {0.5, 0.7, 1.0, 1.4, 2.0, 4.0})
      svg += "<path d=\"M" + number(kLeft, 0) + " " + number(y(v), 1) + "H" + number(width_, 0) +
             "\" stroke=\"var(--line)\"/><text x=\"2\" y=\"" + number(y(v) + 4, 1) + "\">" + number(v, 1) +
             "</text>\n";
    return svg + out_ + "</svg>\n";
  }

 private:
  static constexpr double kLeft = 30.0;
  static constexpr double kPitch = 13.0;
  static constexpr double kHeight = 170.0;
  static double y(double ratio) {
    return 8.0 + kHeight * (1.0 - std::log2(std::clamp(ratio, 0.5, 4.0) / 0.5) / 3.0);
  }
  double width_;
  std::string out_;
};

std::string section(const Machine& machine, const std::vector<Result>& results) {
  const Summary s = summarise(machine, results);
  std::string out = "<h2>" + escaped(machine.name) + "</h2><p>" + escaped(machine.about) + ".</p>";
  out += "<p>Geometric mean to told <b>" + number(s.to_told, 3) + "</b>, to informed <b>" +
         number(s.to_informed, 3) + "</b>; worst row " + number(s.worst, 3) +
         (s.worst_row ? " (" + escaped(s.worst_row->name) + ")" : "") + "; " +
         std::to_string(s.rows - s.broken) + " of " + std::to_string(s.rows) + " rows hold. " +
         escaped(joined(breaches(s))) + "</p>\n";
  Chart chart(static_cast<std::size_t>(s.rows));
  std::string rows;
  std::size_t i = 0;
  for (const auto& r : results) {
    if (r.machine != &machine) continue;
    chart.bar(i++, r);
    rows += table_row(r);
  }
  out += "<div class=\"wide\">" + chart.text() + "<table><thead><tr>";
  for (const char* name : kColumns) out += std::string("<th><button>") + name + "</button></th>";
  return out + "</tr></thead><tbody>\n" + rows + "</tbody></table></div>\n";
}

}  // namespace

void write_page(const std::string& path, const std::vector<Result>& results, const Settings& settings) {
  std::ofstream file(path);
  file << kHead << "<p>Errors are root mean squares over " << settings.seeds
       << " seeds, over that of a filter that is told the fault and drops the channel meanwhile. Bars rise "
          "or fall from "
          "1; short lines are the bounds; a row that breaks a bound is marked, and the last column names the "
          "bound. "
          "Click a column's head to sort.</p>\n";
  for (const Machine* m : machines_of(results)) file << section(*m, results);
  file << kScript;
  file.close();
  if (!file) throw std::runtime_error(path + ": cannot be written");
}

}  // namespace steelyard::suite
