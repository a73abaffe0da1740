// The command line: reads the words, and hands over to commands.hpp.
#include <fmt/format.h>

#include <CLI/CLI.hpp>
#include <algorithm>
#include <csignal>
#include <optional>

#include "base/nearest.hpp"
#include "base/source.hpp"
#include "sequencer/station_file.hpp"
#include "station/commands.hpp"
#include "station/desk.hpp"
#include "station/exit_codes.hpp"
#include "station/jig_check.hpp"
#include "station/recompute.hpp"

namespace {

using namespace jigwright;

constexpr const char* exit_help =
    "Exit codes: 0 GO or done, 1 NO-GO, 2 VOID, 3 faults in files, 4 usage, 5 store, 6 stopped, 7 other.";

/// "step=answer" in two.
bool split_answer(const std::string& word, std::pair<std::string, std::string>& out) {
  const auto at = word.find('=');
  if (at == std::string::npos || at == 0) return false;
  out = {word.substr(0, at), word.substr(at + 1)};
  return true;
}

/// The first word that is no option, when it is no command either: what to write instead.
std::optional<std::string> unknown_command(const CLI::App& app, int argc, char** argv) {
  std::vector<std::string> known;
  for (const CLI::App* command : app.get_subcommands({})) known.push_back(command->get_name());
  for (int i = 1; i < argc; ++i) {
    const std::string word = argv[i];
    if (word == "--store" || word == "--station") ++i;
    if (word.starts_with('-')) continue;
    if (std::find(known.begin(), known.end(), word) != known.end()) return std::nullopt;
    const auto near = nearest(word, known);
    return fmt::format("unknown command \"{}\": {}", printable(word),
                       near ? fmt::format("did you mean \"{}\"?", *near) : fmt::format("known are {}", listed(known)));
  }
  return std::nullopt;
}

}  // namespace

int main(int argc, char** argv) {
  std::signal(SIGXFSZ, SIG_IGN);  // a file at its limit is an error like a full disk, and no end in mid-trial
  CLI::App app{"Jigwright runs a production test jig and remembers which component reel went into which board."};
  app.set_version_flag("--version", "jigwright " JIGWRIGHT_VERSION);
  app.footer(exit_help);
  app.require_subcommand(1);
  app.fallthrough();  // --store and --station may stand behind the command too

  std::string station_path;
  std::string store;
  app.add_option("--station", station_path, "station file (default: $JIGWRIGHT_STATION, then ./station.toml)");
  app.add_option("--store", store, "store file (default: the station's, then results.db)");

  TryOptions trying;
  std::vector<std::string> answers;
  auto* try_command = app.add_subcommand("try", "Try one board, or every board of an order, on the plan's jig");
  try_command->add_option("PLAN", trying.plan, "plan file")->required();
  auto* serial = try_command->add_option("--serial", trying.serial, "the board's serial");
  auto* order = try_command->add_option("--order", trying.order, "every board of this order (simulated jig)");
  serial->excludes(order);
  try_command->add_option("--operator", trying.operator_name, "who tries, for the record");
  try_command->add_option("--fault", trying.faults, "a fault of the simulated jig; `jigwright faults` lists them")
      ->allow_extra_args(false);
  try_command->add_option("--seed", trying.seed, "seed of the simulated noise");
  try_command->add_option("--answer", answers, "STEP=ANSWER to a question of the plan")->allow_extra_args(false);
  try_command->add_flag("--real-time", trying.real_time, "run on the real clock, not on virtual time");
  try_command->add_flag("--json", trying.json,
                        "one JSON event a line; questions are answered on standard input by {\"answer\": ...}");
  try_command->add_flag("--quiet", trying.quiet, "only the last line");

  LineOptions lining;
  auto* line_command = app.add_subcommand("line", "The operator's loop: scan, try, one clear word, next action");
  line_command->add_option("PLAN", lining.plan, "plan file (default: the station's)");
  line_command->add_option("--order", lining.order, "only boards of this order");
  line_command->add_option("--fault", lining.faults, "a fault of the simulated jig; see \"jigwright faults\"");
  line_command->add_option("--seed", lining.seed, "seed of the simulated jig's noise");
  line_command->add_flag("--virtual-time", lining.virtual_time, "don't wait: scans come from a file");

  CardsOptions carding;
  auto* cards_command = app.add_subcommand("cards", "Print the line's code cards as a page (SVG)");
  cards_command->add_option("FILE", carding.file, "file to write (default: standard output)");

  LintOptions linting;
  auto* lint_command = app.add_subcommand("lint", "Check plan, jig and limits, and show what the plan will do");
  lint_command->add_option("PLAN", linting.plan, "plan file")->required();
  lint_command->add_flag("--brief", linting.brief, "the steps only, not every setting");
  lint_command->add_flag("--json", linting.json, "as JSON");

  auto* faults_command = app.add_subcommand("faults", "List the faults that --fault can give the simulated jig");

  EnterOptions entering;
  auto* enter_command = app.add_subcommand("enter", "Take in orders, boards, reels and feeds from CSV files");
  enter_command->add_option("FILE", entering.files, "CSV files; the header tells what each holds")->required();
  enter_command->add_option("--operator", entering.operator_name, "who enters, for the record");

  TraceOptions tracing;
  auto* trace_command = app.add_subcommand("trace", "Which reels a serial carries, or which serials carry a reel");
  auto* trace_serial = trace_command->add_option("--serial", tracing.serial, "the board's serial");
  auto* trace_reel = trace_command->add_option("--reel", tracing.reel, "the reel's name");
  trace_serial->excludes(trace_reel);
  trace_command->add_flag("--csv", tracing.csv, "as CSV");
  trace_command->add_flag("--json", tracing.json, "as JSON");

  ShowOptions showing;
  auto* show_command = app.add_subcommand("show", "A board's record: each finding, least room first");
  show_command->add_option("SERIAL", showing.serial, "the board's serial")->required();
  show_command->add_flag("--csv", showing.csv, "as CSV");
  show_command->add_flag("--json", showing.json, "as JSON");

  SpreadOptions spreading;
  auto* spread_command =
      app.add_subcommand("spread", "How a metric's values spread over the boards, beside its limits");
  spread_command->add_option("STEP", spreading.step, "the step's id")->required();
  spread_command->add_option("METRIC", spreading.metric, "the metric's name, as `show` gives it")->required();
  auto* spread_variant =
      spread_command->add_option("VARIANT", spreading.variant, "one of its variants (default: each)");
  spread_command->add_flag("--all-trials", spreading.all_trials, "retrials too, not only each board's first finding");
  spread_command->add_flag("--csv", spreading.csv, "every finding as CSV");
  spread_command->add_flag("--json", spreading.json, "as JSON");

  AuditOptions auditing;
  auto* audit_command = app.add_subcommand("audit", "Check that the store holds what was recorded, unchanged");
  audit_command->add_flag("--json", auditing.json, "as JSON");
  bool recomputing = false;
  audit_command->add_flag("--recompute", recomputing,
                          "and work every finding and judgement out again from raw readings");

  LogOptions logging;
  auto* log_command = app.add_subcommand("log", "Who did what when, newest last");
  log_command->add_option("--serial", logging.serial, "only of this board");
  log_command->add_option("--last", logging.last, "so many (default: 40; of a board, all)")->check(CLI::PositiveNumber);
  log_command->add_flag("--json", logging.json, "as JSON");

  BackupOptions backing;
  auto* backup_command = app.add_subcommand("backup", "Copy the store while the line works, and read the copy back");
  backup_command->add_option("--to", backing.folder, "folder of the backups (default: the station's)");

  RestoreOptions restoring;
  auto* restore_command = app.add_subcommand("restore", "Make a damaged store again from its backups");
  restore_command->add_option("--from", restoring.folder, "folder of the backups (default: the station's)");
  restore_command->add_option("--operator", restoring.operator_name, "who restores, for the record");

  ArchiveOptions archiving;
  auto* archive_command = app.add_subcommand("archive", "Move raw readings of old trials out of the store");
  archive_command->add_option("FILE", archiving.file, "new file for their records")->required();
  archive_command->add_option("--before", archiving.before, "trials begun before this day (UTC), as in 2024-01-31")
      ->required();
  archive_command->add_option("--operator", archiving.operator_name, "who archives, for the record");

  DeskCommands desk(app);
  JigCheckCommand checking(app);

  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& error) {
    if (const auto advice = unknown_command(app, argc, argv)) {
      fmt::print(stderr, "jigwright: {}\n", *advice);
      return exit_usage;
    }
    return app.exit(error) == 0 ? exit_go : exit_usage;
  }
  for (const std::string& word : answers) {
    trying.answers.emplace_back();
    if (split_answer(word, trying.answers.back())) continue;
    fmt::print(stderr, "jigwright: --answer {}: write STEP=ANSWER\n", printable(word));
    return exit_usage;
  }

  if (*lint_command) return lint(linting);
  if (*faults_command) return list_faults();

  Faults faults;
  const auto station = read_station(station_path, faults);
  if (!station) {
    fmt::print(stderr, "{}", render(faults));
    return exit_files;
  }
  if (store.empty()) store = station->store;
  lining.language = carding.language = station->language;
  if (*cards_command) return cards(carding);
  if (*line_command) {
    if (lining.plan.empty()) lining.plan = station->plan;
    if (lining.plan.empty()) {
      fmt::print(stderr, "jigwright: line: name a plan, or write \"plan\" in the station file\n");
      return exit_usage;
    }
    lining.store = store;
    lining.station_name = station->name;
    lining.backups = station->backups;
    lining.program = "jigwright " JIGWRIGHT_VERSION;
    return line(lining);
  }
  if (const auto code = desk.run(*station, store)) return *code;
  if (const auto code = checking.run(*station, store, "jigwright " JIGWRIGHT_VERSION)) return *code;
  if (*try_command) {
    if (trying.serial.empty() && trying.order.empty()) {
      fmt::print(stderr, "jigwright: try: name --serial S or --order O\n");
      return exit_usage;
    }
    trying.store = store;
    trying.station_name = station->name;
    trying.backups = station->backups;
    trying.program = "jigwright " JIGWRIGHT_VERSION;
    return try_boards(trying);
  }
  entering.store = tracing.store = showing.store = spreading.store = auditing.store = logging.store = store;
  backing.store = restoring.store = archiving.store = store;
  entering.station_name = archiving.station_name = station->name;
  backing.backups = restoring.backups = entering.backups = station->backups;
  if (*enter_command) return enter(entering);
  if (*audit_command) {
    const int whole = audit(auditing);
    if (!recomputing) return whole;
    const RecomputeOptions again{store, auditing.json};
    return std::max(whole, recompute(again));
  }
  if (*backup_command) return backup(backing);
  if (*restore_command) return restore(restoring);
  if (*archive_command) return archive(archiving);
  if (*log_command) return log(logging);
  if (*trace_command) return trace(tracing);
  if (*spread_command) {
    spreading.one_variant = spread_variant->count() > 0;
    return spread(spreading);
  }
  return show(showing);
}
