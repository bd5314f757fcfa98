// SPDX-License-Identifier: Apache-2.0
#include "plugin/config/scan_file.hpp"

#include <algorithm>
#include <array>
#include <filesystem>
#include <limits>
#include <map>
#include <tuple>

#include "plugin/config/file.hpp"
#include "plugin/config/scan_metadata.hpp"
#include "plugin/wire/check.hpp"
#include "plugin/wire/words.hpp"

namespace halfturn::config {
namespace {

using std::string_view;

constexpr std::size_t kMostFaults = 50;
constexpr std::size_t kNone = std::numeric_limits<std::size_t>::max();
constexpr string_view kAxes[] = {"duration_s", "detuning_hz", "amplitude"};  // in the order of wire::AxisKind
constexpr string_view kObserved[] = {"counts", "signal", "photons"};         // in the order of wire::ReadoutKind
constexpr string_view kWeights[] = {"shots", "sigma", "exposures"};
constexpr string_view kColumns[] = {"duration_s", "detuning_hz", "amplitude", "counts",    "shots",
                                    "signal",     "sigma",       "photons",   "exposures", "site"};

/// Where the columns are.
struct Layout {
  std::size_t width = 0;
  std::size_t observed = kNone, weight = kNone, site = kNone;
  std::optional<double> fixed_weight;
};

/// One line of the table.
struct Point {
  double axis = 0.0, observed = 0.0, weight = 0.0;
};

std::size_t index_of(std::span<const string_view> words, string_view word) {
  const auto at = std::find(words.begin(), words.end(), word);
  return at == words.end() ? kNone : static_cast<std::size_t>(at - words.begin());
}

class ScanReader {
 public:
  explicit ScanReader(const ScanLimits& limits) : limits_(limits) {}

  ScanReading read(string_view text) {
    Table table = read_csv(text);
    reader_.faults = std::move(table.faults);
    Metadata metadata = read_metadata(reader_, table.comments);
    scan_ = std::move(metadata.scan);
    if (table.rows.empty()) {
      fault({"", 1, 1}, "", "found no header, expected one such as duration_s,counts,shots");
    } else if (read_header(table.rows.front(), metadata)) {
      read_rows(table.rows);
      check_metadata(table.rows.front(), metadata);
    }
    return result();
  }

 private:
  void fault(const Cell& cell, string_view path, std::string message) {
    reader_.faults.push_back({cell.line, cell.column, std::string(path), std::move(message)});
  }

  bool check_columns(const Row& header) {
    const std::size_t before = reader_.faults.size();
    for (std::size_t i = 0; i < header.size(); ++i) {
      const Cell& cell = header[i];
      const string_view separators =
          cell.text.find_first_of(";\t") == std::string::npos ? "" : "; columns are separated by commas";
      if (index_of(kColumns, cell.text) == kNone)
        fault(cell, "",
              "found the unknown column " + wire::in_quotes(cell.text) + ", expected a known one: the nearest is " +
                  wire::in_quotes(wire::nearest(cell.text, kColumns)) + std::string(separators));
      else if (std::any_of(header.begin(), header.begin() + static_cast<std::ptrdiff_t>(i),
                           [&](const Cell& c) { return c.text == cell.text; }))
        fault(cell, cell.text, "found the column a second time, expected it once");
      else if ((i == 0) != (index_of(kAxes, cell.text) != kNone))
        fault(cell, cell.text,
              "found " + wire::in_quotes(cell.text) +
                  ", expected duration_s, detuning_hz or amplitude as the first column, and only there");
    }
    return reader_.faults.size() == before;
  }

  bool read_header(const Row& header, const Metadata& metadata) {
    if (!check_columns(header)) return false;
    scan_.axis_kind = static_cast<wire::AxisKind>(index_of(kAxes, header[0].text));
    layout_.width = header.size();
    const auto column = [&](string_view name) {
      const auto at = std::find_if(header.begin(), header.end(), [&](const Cell& cell) { return cell.text == name; });
      return at == header.end() ? kNone : static_cast<std::size_t>(at - header.begin());
    };
    layout_.site = column("site");
    std::size_t readouts = 0;
    for (std::size_t kind = 0; kind < 3; ++kind) {
      if (column(kObserved[kind]) == kNone && column(kWeights[kind]) == kNone) continue;
      ++readouts;
      scan_.readout_kind = static_cast<wire::ReadoutKind>(kind);
      layout_.observed = column(kObserved[kind]);
      layout_.weight = column(kWeights[kind]);
    }
    const auto kind = static_cast<std::size_t>(scan_.readout_kind);
    layout_.fixed_weight = std::array{metadata.shots, metadata.sigma, metadata.exposures}[kind];
    if (readouts == 1 && layout_.observed != kNone && (layout_.weight != kNone) != layout_.fixed_weight.has_value())
      return true;
    fault(header[0], "",
          "found " +
              std::string(readouts > 1    ? "several readouts"
                          : readouts == 0 ? "no readout"
                                          : "half of a readout or a weight given twice") +
              ", expected one of counts,shots or signal,sigma or photons,exposures");
    return false;
  }

  std::optional<double> number(const Cell& cell, string_view path, string_view expected) {
    const auto value = decimal(cell.text);
    if (!value) fault(cell, path, "found " + wire::in_quotes(cell.text) + ", expected " + std::string(expected));
    return value;
  }

  std::optional<double> read_axis(const Cell& cell) {
    const auto path = kAxes[static_cast<std::size_t>(scan_.axis_kind)];
    const auto value = number(cell, path, "a number");
    if (!value || *value >= 0.0 || scan_.axis_kind == wire::AxisKind::detuning) return value;
    fault(cell, path, "found " + wire::in_quotes(cell.text) + ", expected a number of at least 0");
    return std::nullopt;
  }

  bool not_measured(const Cell& cell) const { return cell.text.empty() || cell.text == "null"; }

  /// The weight beside a value; 0 where there is none.
  std::optional<double> read_weight(const Row& row) {
    if (layout_.weight == kNone) return layout_.fixed_weight;
    const Cell& cell = row[layout_.weight];
    if (not_measured(cell)) return 0.0;
    const auto path = kWeights[static_cast<std::size_t>(scan_.readout_kind)];
    const bool sigma = scan_.readout_kind == wire::ReadoutKind::gaussian;
    const string_view expected = sigma ? "a number above 0" : "a whole number of at least 0";
    const auto value = number(cell, path, expected);
    if (!value || (sigma ? *value > 0.0 : wire::is_count(*value))) return value;
    fault(cell, path, "found " + wire::in_quotes(cell.text) + ", expected " + std::string(expected));
    return std::nullopt;
  }

  double no_weight() const {
    return scan_.readout_kind == wire::ReadoutKind::gaussian ? std::numeric_limits<double>::infinity() : 0.0;
  }

  std::optional<Point> read_point(const Row& row) {
    const auto axis = read_axis(row[0]);
    const auto weight = read_weight(row);
    if (!axis || !weight) return std::nullopt;
    const Cell& cell = row[layout_.observed];
    if (not_measured(cell) || *weight == 0.0) return Point{*axis, 0.0, no_weight()};
    const auto kind = static_cast<std::size_t>(scan_.readout_kind);
    const auto observed = number(cell, kObserved[kind], "a number, or nothing where the point was not measured");
    if (!observed || scan_.readout_kind == wire::ReadoutKind::gaussian)
      return observed ? std::optional(Point{*axis, *observed, *weight}) : std::nullopt;
    const bool whole = wire::is_count(*observed);
    const bool fits = scan_.readout_kind == wire::ReadoutKind::poisson || *observed <= *weight;
    if (whole && fits) return Point{*axis, *observed, *weight};
    fault(cell, kObserved[kind],
          "found " + wire::in_quotes(cell.text) + ", expected " +
              (whole ? "at most the shots beside it" : "a whole number of at least 0"));
    return std::nullopt;
  }

  /// The row of the site, or kNone after a fault.
  std::size_t site_index(const Row& row) {
    if (layout_.site == kNone) return 0;
    const Cell& cell = row[layout_.site];
    if (!wire::is_printable(cell.text, 48)) {
      fault(cell, "site", "found " + wire::in_quotes(cell.text) + ", expected a name of 1 to 48 printable characters");
      return kNone;
    }
    const auto [at, fresh] = sites_.emplace(cell.text, sites_.size());
    if (fresh) scan_.sites.push_back(cell.text);
    if (fresh && scan_.sites.size() > limits_.sites)
      fault(cell, "site", "found more than " + std::to_string(limits_.sites) + " sites, expected fewer");
    return scan_.sites.size() > limits_.sites ? kNone : at->second;
  }

  /// The place on the axis of a value that the site shows for the nth time.
  std::size_t axis_index(std::size_t site, double axis) {
    const std::size_t repeat = repeats_[{site, axis}]++;
    const auto [at, fresh] = places_.emplace(std::pair(axis, repeat), scan_.axis.size());
    if (fresh) scan_.axis.push_back(axis);
    return at->second;
  }

  void read_row(const Row& row) {
    if (row.size() != layout_.width)
      return fault(row[0], "",
                   "found " + std::to_string(row.size()) + " values, expected " + std::to_string(layout_.width) +
                       " as in the header");
    const auto point = read_point(row);
    const std::size_t site = site_index(row);
    if (!point || site == kNone) return;
    cells_.emplace_back(site, axis_index(site, point->axis), *point);
  }

  void read_rows(const std::vector<Row>& rows) {
    if (rows.size() == 1) fault(rows[0][0], "", "found a header alone, expected at least one point below it");
    for (std::size_t i = 1; i < rows.size() && reader_.faults.size() < kMostFaults; ++i) {
      read_row(rows[i]);
      if (scan_.axis.size() <= limits_.points) continue;
      return fault(rows[i][0], "", "found more than " + std::to_string(limits_.points) + " points, expected fewer");
    }
    fill(rows.front().front());
  }

  void fill(const Cell& header) {
    const std::size_t sites = layout_.site == kNone ? 1 : scan_.sites.size();
    // A file of many sites that share no point would fill a table far larger than itself.
    if (sites * scan_.axis.size() > 16 * (cells_.size() + 1024))
      return fault(header, "site", "found sites whose points hardly coincide, expected sites on a common axis");
    scan_.observed.assign(sites, std::vector<double>(scan_.axis.size(), 0.0));
    scan_.weight.assign(sites, std::vector<double>(scan_.axis.size(), no_weight()));
    for (const auto& [site, place, point] : cells_) {
      scan_.observed[site][place] = point.observed;
      scan_.weight[site][place] = point.weight;
    }
  }

  void check_metadata(const Row& header, const Metadata& metadata) {
    const Place top{&metadata.node, ""};
    if (scan_.axis_kind == wire::AxisKind::duration) scan_.pulse_s.reset();
    if (scan_.axis_kind != wire::AxisKind::duration && !scan_.pulse_s && !top["pulse_s"])
      fault(header[0], "pulse_s",
            "found nothing, expected the length of the pulse as a line such as # pulse_s: 4.2e-6 above the header");
    if (metadata.references_kind && *metadata.references_kind != scan_.readout_kind)
      reader_.fault(top["references"],
                    "found references of another readout than the scan's, expected the same (a Gaussian signal has none)");
    if (!scan_.at_s.empty() && scan_.at_s.size() != scan_.axis.size())
      reader_.fault(top["at_s"], "found " + std::to_string(scan_.at_s.size()) + " times, expected one for each of " +
                                     std::to_string(scan_.axis.size()) + " points");
  }

  ScanReading result() {
    ScanReading reading;
    auto& faults = reader_.faults;
    std::stable_sort(faults.begin(), faults.end(), [](const Diagnosis& a, const Diagnosis& b) {
      return std::tie(a.line, a.column) < std::tie(b.line, b.column);
    });
    if (faults.size() > kMostFaults) faults.resize(kMostFaults);
    if (faults.empty()) reading.scan = std::move(scan_);
    reading.faults = std::move(faults);
    return reading;
  }

  const ScanLimits& limits_;
  Reader reader_;
  wire::Scan scan_;
  Layout layout_;
  std::vector<std::tuple<std::size_t, std::size_t, Point>> cells_;
  std::map<std::string, std::size_t> sites_;
  std::map<std::pair<std::size_t, double>, std::size_t> repeats_;
  std::map<std::pair<double, std::size_t>, std::size_t> places_;
};

}  // namespace

ScanReading read_scan(const std::string& text, const ScanLimits& limits) {
  if (text.size() > limits.bytes)
    return {std::nullopt, {{0, 0, "", "found more than " + std::to_string(limits.bytes) + " bytes, expected fewer"}}};
  if (const std::size_t bad = first_bad_byte(text); bad != std::string::npos) {
    const Position at = position(text, bad);
    return {std::nullopt, {{at.line, at.column, "", "found a byte that is not text in UTF-8, expected UTF-8"}}};
  }
  const string_view body = text;
  return ScanReader(limits).read(body.starts_with("\xEF\xBB\xBF") ? body.substr(3) : body);
}

ScanReading read_scan_file(const std::string& path, const ScanLimits& limits) {
  const auto text = file_text(path, limits.bytes);
  if (!text) return {std::nullopt, {{0, 0, "", text.error().message}}};
  ScanReading reading = read_scan(*text, limits);
  if (reading.scan && reading.scan->scan_name.empty())
    reading.scan->scan_name = std::filesystem::path(path).stem().string().substr(0, 64);
  return reading;
}

}  // namespace halfturn::config
