// What each word of the command line does. main.cpp only reads the words; these print and return the exit code.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <utility>
#include <vector>

namespace jigwright {

struct TryOptions {
  std::string plan;
  std::string serial;  ///< one board ...
  std::string order;   ///< ... or every board of an order
  std::string store;
  std::string station_name;
  std::string operator_name;
  std::string program;
  std::vector<std::string> faults;                           ///< of the simulated jig
  std::vector<std::pair<std::string, std::string>> answers;  ///< step, answer
  std::uint64_t seed{1};
  bool real_time{false};
  bool json{false};
  bool quiet{false};
};
int try_boards(const TryOptions& options);

struct LintOptions {
  std::string plan;
  bool json{false};
  bool settings{false};  ///< every setting, not only the steps
};
int lint(const LintOptions& options);

}  // namespace jigwright
