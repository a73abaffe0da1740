#include "sequencer/station_file.hpp"

#include <doctest/doctest.h>

using namespace jigwright;

TEST_CASE("the command line goes before the environment, and that before the file in the folder") {
  CHECK(station_path("mine.toml", "theirs.toml") == "mine.toml");
  CHECK(station_path("", "theirs.toml") == "theirs.toml");
}

TEST_CASE("the sample's station is read, its store and plan from its own folder") {
  Faults faults;
  const auto station = read_station(SOURCE_FOLDER "/sample-runs/station.toml", faults);
  CHECK(render(faults) == "");
  REQUIRE(station.has_value());
  CHECK(station->name == "bench 1");
  CHECK(station->store == SOURCE_FOLDER "/sample-runs/results.db");
  CHECK(station->plan == SOURCE_FOLDER "/sample-runs/plan-b.toml");
  CHECK(station->language == "en");
  CHECK(station->zone == "UTC");
}

TEST_CASE("what the file leaves out has its default") {
  SourceText text;
  text.name = "folder/station.toml";
  text.text = "[station]\nname = \"bench 2\"\n";
  Faults faults;
  const auto root = parse_toml(std::make_shared<const SourceText>(text), faults);
  REQUIRE(root.has_value());
  const StationFile station = read_station_tree(*root, faults);
  CHECK_FALSE(faults.any());
  CHECK(station.store == "folder/results.db");
  CHECK(station.plan.empty());
  CHECK(station.zone == "UTC");
}

TEST_CASE("a station file that is named but not there is a fault") {
  Faults faults;
  CHECK_FALSE(read_station("/nowhere/station.toml", faults).has_value());
  CHECK(render(faults) == "/nowhere/station.toml: can't read the file: No such file or directory\n  check the path\n");
}
