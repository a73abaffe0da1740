#include "steps/tone_proof.hpp"

#include <doctest/doctest.h>

#include <complex>
#include <numbers>

using namespace jigwright;

namespace {

ToneFacts facts() {
  return {0.2, 10e3, 0.01, 0.01, 0.2e-3};
}

/// The divider in complex numbers: R in series, then the board's resistance beside the capacitance.
double divider_V(double r_ohm, double board_ohm, double c_F, double f_Hz) {
  using namespace std::complex_literals;
  const double w = 2 * std::numbers::pi * f_Hz;
  const std::complex<double> below = 1.0 / (1.0 / board_ohm + 1i * w * c_F);
  return 0.2 * std::abs(below / (r_ohm + below));
}

}  // namespace

TEST_CASE("the tone's level agrees with the divider in complex numbers") {
  for (const double c_F : {65e-12, 1e-9, 100e-9, 10e-6})
    for (const double f_Hz : {100.0, 3e3, 200e3})
      CHECK(tone_level(facts(), parallel(10e3, 22e3), c_F, f_Hz) ==
            doctest::Approx(divider_V(10e3, 22e3, c_F, f_Hz)).epsilon(1e-12));
}

TEST_CASE("the capacitance put into the divider comes back from its level") {
  const ToneBase base = tone_base(facts(), divider_V(10e3, 22e3, 65e-12, 100));
  REQUIRE(base.usable);
  CHECK(base.parallel_ohm == doctest::Approx(6875).epsilon(1e-6));
  for (const double c_F : {65e-12, 168e-12, 1.077e-9, 100e-9, 10e-6}) {
    const double f_Hz = tone_frequency(6875, c_F, 100, 200e3);
    const Capacitance c = tone_capacitance(facts(), base, divider_V(10e3, 22e3, c_F, f_Hz), f_Hz);
    CHECK(c.value_F == doctest::Approx(c_F).epsilon(1e-5));
    CHECK(c.u_F > 0);
    CHECK(c.u_F < 0.1 * c_F);
  }
}

TEST_CASE("the tone's frequency makes w Rp C two, within what the jig can do") {
  CHECK(tone_frequency(6875, 10e-9, 100, 200e3) == doctest::Approx(2 / (2 * std::numbers::pi * 6875 * 10e-9)));
  CHECK(tone_frequency(6875, 10e-6, 100, 200e3) == 100);
  CHECK(tone_frequency(6875, 100e-12, 100, 200e3) == 200e3);
}

// Worked apart: C = sqrt((V0/V)^2 - 1) / (w Rp) and Rp = R V0 / A; both levels moved by their bounds / sqrt 3 in turn.
TEST_CASE("the stated uncertainty is what moving each level by its own makes") {
  const double f_Hz = 2000;
  const double v0 = divider_V(10e3, 22e3, 65e-12, 100);
  const double v = divider_V(10e3, 22e3, 20e-9, f_Hz);
  auto relative = [&](double level) {
    return std::sqrt(0.01 * 0.01 / 3 + 0.01 * 0.01 / 3 + 0.2e-3 * 0.2e-3 / (3 * level * level));
  };
  auto c_of = [&](double base_V, double level_V) {
    const double q = base_V / level_V;
    return std::sqrt(q * q - 1) / (2 * std::numbers::pi * f_Hz * 10e3 * base_V / 0.2);
  };
  const double by_v = (c_of(v0, v * (1 + relative(v))) - c_of(v0, v * (1 - relative(v)))) / 2;
  const double by_v0 = (c_of(v0 * (1 + relative(v0)), v) - c_of(v0 * (1 - relative(v0)), v)) / 2;
  const Capacitance c = tone_capacitance(facts(), tone_base(facts(), v0), v, f_Hz);
  CHECK(c.u_F == doctest::Approx(std::hypot(by_v, by_v0)).epsilon(1e-3));
}

TEST_CASE("no capacitance at all reads about nothing, with an uncertainty that is no nonsense") {
  const double v0 = divider_V(10e3, 22e3, 0, 100);
  const Capacitance c = tone_capacitance(facts(), tone_base(facts(), v0), v0 * 1.002, 200e3);
  CHECK(c.value_F == 0);
  CHECK(c.u_F > 0);
  CHECK(c.u_F < 100e-12);
}

TEST_CASE("a level near the detector's floor says so in its uncertainty") {
  const ToneBase base = tone_base(facts(), divider_V(10e3, 22e3, 65e-12, 100));
  const Capacitance c = tone_capacitance(facts(), base, 0.5e-3, 200e3);
  CHECK(c.u_F >= c.value_F);
}

TEST_CASE("an open tone path or a shorted output says nothing") {
  const ToneBase base = tone_base(facts(), 0.3e-3);
  CHECK_FALSE(base.usable);
  CHECK(std::isnan(tone_capacitance(facts(), base, 0.3e-3, 200e3).value_F));
}
