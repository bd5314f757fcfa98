// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>
#include <utility>

#include "model/infer/fit.hpp"
#include "model/quantity/constants.hpp"
#include "model/quantity/format.hpp"
#include "model/recalibrate/reason.hpp"

/// How the gates speak: numbers as text, and reasons of either effect.
namespace halfturn::recalibrate {

inline std::string hertz(double angular) { return engineering(angular / constants::kTwoPi, "Hz"); }

inline std::string hertz(const infer::Estimate& e) { return with_uncertainty(e.value / constants::kTwoPi, e.sigma / constants::kTwoPi, "Hz"); }

inline std::string percent(double ratio) { return plain(100.0 * ratio, 2) + " %"; }

inline void refuse(Reasons& reasons, std::string code, std::string text) { reasons.push_back({std::move(code), std::move(text), true}); }

inline void caution(Reasons& reasons, std::string code, std::string text) { reasons.push_back({std::move(code), std::move(text), false}); }

}  // namespace halfturn::recalibrate
