// Broken files beside the exact words that a person reads about them. tests/data/broken holds
//   jig-NAME.toml, limits-NAME.toml, station-NAME.toml, plan-NAME.toml   each with NAME.expected beside it
//   NAME/plan.toml with its own jig or limits                            with NAME/expected
//   good-*.toml                                                          sound files, read without a word
// A new case needs no C++. JIGWRIGHT_SHOW_BROKEN=1 prints what each case yields, to be read and taken over by hand.
#include <doctest/doctest.h>

#include <algorithm>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <iostream>
#include <sstream>

#include "fixtures/jig.hpp"
#include "sequencer/plan.hpp"
#include "sequencer/station_file.hpp"

using namespace jigwright;
namespace fs = std::filesystem;

namespace {

const std::string folder = TEST_DATA "/broken/";

std::string content(const fs::path& path) {
  std::ifstream in(path, std::ios::binary);
  std::ostringstream out;
  out << in.rdbuf();
  return out.str();
}

/// Messages name files as they were opened; here, from the folder of broken files.
std::string without_folder(std::string text) {
  for (auto at = text.find(folder); at != std::string::npos; at = text.find(folder, at)) text.erase(at, folder.size());
  return text;
}

void read_tree(const fs::path& path, void (*read)(const Node&, Faults&), Faults& faults) {
  auto source = read_source(path.string());
  REQUIRE(source.ok());
  if (const auto root = parse_toml(source.value(), faults)) read(*root, faults);
}

std::string words_about(const fs::path& path) {
  Faults faults;
  const std::string name = path.filename().string();
  if (name.starts_with("jig-") || name == "good-jig.toml")
    read_tree(
        path, [](const Node& n, Faults& f) { read_jig(n, f); }, faults);
  else if (name.starts_with("limits-") || name == "good-limits.toml")
    read_tree(
        path, [](const Node& n, Faults& f) { read_limits_tree(n, f); }, faults);
  else if (name.starts_with("station-") || name == "good-station.toml")
    read_tree(
        path, [](const Node& n, Faults& f) { read_station_tree(n, f); }, faults);
  else {
    const auto plan = read_plan(path.string(), faults);
    CHECK((plan == nullptr) == faults.any());
  }
  return without_folder(render(faults));
}

struct Case {
  fs::path input, expected;
};

std::vector<Case> cases() {
  std::vector<Case> out;
  for (const auto& entry : fs::directory_iterator(folder)) {
    const fs::path& path = entry.path();
    if (entry.is_directory())
      out.push_back({path / "plan.toml", path / "expected"});
    else if (path.extension() == ".toml" && !path.filename().string().starts_with("good-"))
      out.push_back({path, fs::path(path).replace_extension(".expected")});
  }
  std::sort(out.begin(), out.end(), [](const Case& a, const Case& b) { return a.input < b.input; });
  return out;
}

}  // namespace

TEST_CASE("every broken file gets its exact message") {
  const bool show = std::getenv("JIGWRIGHT_SHOW_BROKEN") != nullptr;
  for (const Case& c : cases()) {
    CAPTURE(c.input.string());
    const std::string words = words_about(c.input);
    if (show) std::cout << "==> " << without_folder(c.expected.string()) << "\n" << words;
    CHECK(words == content(c.expected));
    CHECK_FALSE(words.empty());
  }
}

TEST_CASE("there are at least forty broken files") {
  CHECK(cases().size() >= 40);
}

TEST_CASE("the sound files beside them are read without a word") {
  for (const char* name : {"good-jig.toml", "good-limits.toml", "good-station.toml", "good-plan.toml"}) {
    CAPTURE(name);
    CHECK(words_about(folder + name) == "");
  }
}
