// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <array>
#include <bitset>
#include <cstdint>
#include <initializer_list>
#include <optional>
#include <string_view>

#include "plugin/wire/request.hpp"

/// The fields of requests: names, shapes, and the maps that they stand in.
namespace halfturn::wire {

enum class Field : std::uint8_t {
  proto, kind, id, scan, scans, options,
  scan_name, drive, taken_at, duration_s, detuning_hz, amplitude, counts, shots, signal, sigma, photons, exposures, sites,
  pulse_s, drive_amplitude, carrier_hz, references, prepared, at_s, ambient,
  applied_at, pulses, since, until, limit, by, why,
  store, overlay_points, dynamics, level,
  bright_counts, bright_shots, dark_counts, dark_shots, bright_photons, bright_exposures, dark_photons, dark_exposures,
};
inline constexpr std::size_t kFields = static_cast<std::size_t>(Field::dark_exposures) + 1;

/// What a field holds. `rows` is a number, a list of numbers, or a list of such lists, each number possibly null.
enum class Shape : std::uint8_t { number, flag, text, time, numbers, rows, texts, named_numbers, map, maps };

/// The maps of a request whose fields are known beforehand.
enum class Map : std::uint8_t { request, scan, references, options };

struct FieldRow {
  std::string_view name;
  Shape shape;
  std::uint8_t maps;  // one bit for each Map that the field may stand in
};

namespace detail {
constexpr std::uint8_t kIn(std::initializer_list<Map> maps) {
  unsigned bits = 0;
  for (const Map map : maps) bits |= 1u << static_cast<unsigned>(map);
  return static_cast<std::uint8_t>(bits);
}
inline constexpr std::uint8_t kTop = kIn({Map::request});
inline constexpr std::uint8_t kScan = kIn({Map::scan});
inline constexpr std::uint8_t kBoth = kIn({Map::request, Map::scan});
inline constexpr std::uint8_t kReferences = kIn({Map::references});
inline constexpr std::uint8_t kOptions = kIn({Map::options});
}  // namespace detail

/// In the order of Field.
inline constexpr std::array<FieldRow, kFields> kFieldTable = {{
    {"proto", Shape::number, detail::kTop},
    {"kind", Shape::text, detail::kTop},
    {"id", Shape::text, detail::kTop},
    {"scan", Shape::map, detail::kTop},
    {"scans", Shape::maps, detail::kTop},
    {"options", Shape::map, detail::kTop},
    {"scan_name", Shape::text, detail::kBoth},
    {"drive", Shape::text, detail::kBoth},
    {"taken_at", Shape::time, detail::kScan},
    {"duration_s", Shape::numbers, detail::kBoth},
    {"detuning_hz", Shape::numbers, detail::kBoth},
    {"amplitude", Shape::numbers, detail::kBoth},
    {"counts", Shape::rows, detail::kBoth},
    {"shots", Shape::rows, detail::kBoth},
    {"signal", Shape::rows, detail::kBoth},
    {"sigma", Shape::rows, detail::kBoth},
    {"photons", Shape::rows, detail::kBoth},
    {"exposures", Shape::rows, detail::kBoth},
    {"sites", Shape::texts, detail::kScan},
    {"pulse_s", Shape::number, detail::kScan},
    {"drive_amplitude", Shape::number, detail::kScan},
    {"carrier_hz", Shape::number, detail::kBoth},
    {"references", Shape::map, detail::kScan},
    {"prepared", Shape::text, detail::kScan},
    {"at_s", Shape::numbers, detail::kBoth},
    {"ambient", Shape::named_numbers, detail::kScan},
    {"applied_at", Shape::time, detail::kTop},
    {"pulses", Shape::named_numbers, detail::kTop},
    {"since", Shape::time, detail::kTop},
    {"until", Shape::time, detail::kTop},
    {"limit", Shape::number, detail::kTop},
    {"by", Shape::text, detail::kTop},
    {"why", Shape::text, detail::kTop},
    {"store", Shape::flag, detail::kOptions},
    {"overlay_points", Shape::number, detail::kOptions},
    {"dynamics", Shape::texts, detail::kOptions},
    {"level", Shape::number, detail::kOptions},
    {"bright_counts", Shape::number, detail::kReferences},
    {"bright_shots", Shape::number, detail::kReferences},
    {"dark_counts", Shape::number, detail::kReferences},
    {"dark_shots", Shape::number, detail::kReferences},
    {"bright_photons", Shape::number, detail::kReferences},
    {"bright_exposures", Shape::number, detail::kReferences},
    {"dark_photons", Shape::number, detail::kReferences},
    {"dark_exposures", Shape::number, detail::kReferences},
}};

constexpr const FieldRow& row(Field field) { return kFieldTable[static_cast<std::size_t>(field)]; }
constexpr std::string_view name(Field field) { return row(field).name; }

/// The field of that name in that map.
constexpr std::optional<Field> field_named(std::string_view text, Map map) {
  for (std::size_t i = 0; i < kFields; ++i)
    if ((kFieldTable[i].maps >> static_cast<unsigned>(map) & 1u) && kFieldTable[i].name == text)
      return static_cast<Field>(i);
  return std::nullopt;
}

/// A set of fields.
class FieldSet {
 public:
  FieldSet() = default;
  FieldSet(std::initializer_list<Field> fields) {
    for (const Field field : fields) bits_.set(static_cast<std::size_t>(field));
  }
  bool has(Field field) const { return bits_.test(static_cast<std::size_t>(field)); }
  FieldSet operator|(const FieldSet& other) const {
    FieldSet both = *this;
    both.bits_ |= other.bits_;
    return both;
  }

 private:
  std::bitset<kFields> bits_;
};

/// In the order of Kind, AxisKind and ReadoutKind.
inline constexpr std::array<std::string_view, 10> kKindNames = {"fit",     "begin", "points", "end",     "applied",
                                                                "history", "next",  "hold",   "release", "status"};
inline constexpr std::array<Field, 3> kAxisFields = {Field::duration_s, Field::detuning_hz, Field::amplitude};
inline constexpr std::array<Field, 3> kObservedFields = {Field::counts, Field::signal, Field::photons};
inline constexpr std::array<Field, 3> kWeightFields = {Field::shots, Field::sigma, Field::exposures};

constexpr std::string_view name(Kind kind) { return kKindNames[static_cast<std::size_t>(kind)]; }
constexpr std::string_view axis_name(AxisKind kind) { return name(kAxisFields[static_cast<std::size_t>(kind)]); }

}  // namespace halfturn::wire
