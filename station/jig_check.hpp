// `jigwright jig-check PLAN`: the jig proves itself on the simulated jig, one thing in the nest after another; one page
// says what each part found, and an act in the store what came of it.
#pragma once
#include <memory>
#include <optional>
#include <string>

namespace CLI {
class App;
}

namespace jigwright {

struct StationFile;

class JigCheckCommand {
 public:
  explicit JigCheckCommand(CLI::App& app);
  ~JigCheckCommand();
  JigCheckCommand(const JigCheckCommand&) = delete;
  JigCheckCommand& operator=(const JigCheckCommand&) = delete;

  /// The exit code when this command was named; else nullopt. 0 the jig is OK, 1 something is missed, 2 nothing is
  /// missed but a part is in doubt.
  std::optional<int> run(const StationFile& station, const std::string& store, const std::string& program);

 private:
  struct Words;
  std::unique_ptr<Words> words_;
};

}  // namespace jigwright
