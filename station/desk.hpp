// The engineer's and the office's commands on boards, reels, people and revisions: hold, release, waive, scrap, review,
// allow, repair, relabel, ship, reels, people, adopt, revisions, holds. Each one that changes something is a record
// with a name and a reason.
#pragma once
#include <memory>
#include <optional>
#include <string>

namespace CLI {
class App;
}

namespace jigwright {

struct StationFile;

class DeskCommands {
 public:
  explicit DeskCommands(CLI::App& app);
  ~DeskCommands();
  DeskCommands(const DeskCommands&) = delete;
  DeskCommands& operator=(const DeskCommands&) = delete;

  /// The exit code of the command that was named; nullopt when it is none of these.
  std::optional<int> run(const StationFile& station, const std::string& store);

 private:
  struct Words;
  std::unique_ptr<Words> words_;
};

}  // namespace jigwright
