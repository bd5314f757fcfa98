// SPDX-License-Identifier: Apache-2.0
#include "model/dynamics/pulse_shape.hpp"

#include <fstream>
#include <limits>
#include <map>
#include <string>

#include "tests/support/catch.hpp"

using namespace halfturn;
using namespace halfturn::dynamics;

// Source: scipy.integrate.quad over envelopes, and their half-amplitude points by root finding (dynamics_shapes.py).
TEST_CASE("the area of a pulse agrees with numerical integration") {
  const std::map<std::string, Envelope> envelopes = {{"square", Envelope::square},
                                                     {"gaussian", Envelope::gaussian},
                                                     {"blackman", Envelope::blackman},
                                                     {"raised_cosine", Envelope::raised_cosine}};
  std::ifstream file(std::string(HALFTURN_BINARY_DIR) + "/reference/dynamics_shapes.txt");
  std::string envelope, edge;
  PulseShape shape;
  double length_s = 0, expected = 0;
  int lines = 0;
  while (file >> envelope >> edge >> shape.edge_s >> shape.cut >> length_s >> expected) {
    ++lines;
    shape.envelope = envelopes.at(envelope);
    shape.edge = edge == "linear" ? Edge::linear : Edge::raised_cosine;
    const auto factor = area_factor(shape, length_s);
    INFO(envelope << ", edge " << edge << " " << shape.edge_s << ", cut " << shape.cut);
    REQUIRE(factor);
    CHECK(*factor == Approx(expected).epsilon(1e-11));
  }
  CHECK(lines == 32);
}

TEST_CASE("a pulse that cannot be played is a fault at its place") {
  PulseShape shape;
  shape.edge_s = 60e-9;
  CHECK(shortest_length_s(shape) == 60e-9);
  CHECK(area_factor(shape, 60e-9));
  const auto short_pulse = area_factor(shape, 59e-9);
  REQUIRE_FALSE(short_pulse);
  CHECK(short_pulse.error().code == "bad_value");
  CHECK(short_pulse.error().where == "edge");
  CHECK(short_pulse.error().message ==
        "found an edge of 60.000 ns in a pulse of 59.000 ns, which never reaches its full amplitude; expected an edge no longer than "
        "the pulse");
  shape.edge_s = -1e-9;
  CHECK(area_factor(shape, 1e-6).error().where == "edge");
  shape.edge_s = std::numeric_limits<double>::quiet_NaN();
  CHECK(area_factor(shape, 1e-6).error().where == "edge");
  for (double length_s : {0.0, -1e-6, std::numeric_limits<double>::infinity(), std::numeric_limits<double>::quiet_NaN()})
    CHECK(area_factor({Envelope::blackman}, length_s).error().where == "length");
  for (double cut : {1.0, 0.0, 101.0, std::numeric_limits<double>::quiet_NaN()})
    CHECK(area_factor({Envelope::gaussian, Edge::linear, 0.0, cut}, 1e-6).error().where == "width");
}
