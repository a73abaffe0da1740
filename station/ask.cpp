// `enter`, `trace`, `show`, `spread`, `audit`, `log` and `faults`: lists in, answers out.
#include <fmt/format.h>

#include <cstdio>
#include <limits>

#include "db/enter.hpp"
#include "db/questions.hpp"
#include "db/spread.hpp"
#include "db/store.hpp"
#include "fixtures/simulated/simulated_bench.hpp"
#include "station/audit_text.hpp"
#include "station/commands.hpp"
#include "station/exit_codes.hpp"
#include "station/fail.hpp"
#include "station/questions.hpp"
#include "station/spread_text.hpp"

namespace jigwright {
namespace {

Result<std::unique_ptr<Store>> for_reading(const std::string& path) {
  StoreOptions options;
  options.access = StoreOptions::Access::read;
  auto store = Store::open(path, options);
  if (store) tell(store.value()->notice());
  return store;
}

Form form(bool csv, bool json) {
  return json ? Form::json : csv ? Form::csv : Form::table;
}

template <class T>
int print_answer(const Result<T>& answer, Form form) {
  if (!answer.ok()) return fail(answer.error());
  fmt::print("{}", render(answer.value(), form));
  return exit_go;
}

/// Row by row: a million of them need no memory.
int spread_rows(Database& database, const SpreadAsked& asked) {
  bool begun = false;
  const auto done = each_spread_row(database, asked, [&](const KnownMetric& metric, const SpreadRow& row) {
    if (!begun) std::fputs(spread_csv_header().c_str(), stdout);
    begun = true;
    std::fputs(spread_csv_line(metric, row).c_str(), stdout);
  });
  if (!done) return fail(done.error());
  if (!begun) std::fputs(spread_csv_header().c_str(), stdout);
  return exit_go;
}

}  // namespace

int enter(const EnterOptions& options) {
  std::vector<std::shared_ptr<const SourceText>> sources;
  for (const std::string& file : options.files) {
    auto source = read_source(file, std::size_t{256} << 20);
    if (!source) return fail(source.error());
    sources.push_back(std::move(source.value()));
  }
  StoreOptions how;
  how.backups = options.backups;
  auto store = Store::open(options.store, how);
  if (!store) return fail(store.error());
  tell(store.value()->notice());
  Faults faults;
  const auto entered = store.value()->enter(sources, utc_us(), faults, {options.station_name, options.operator_name});
  if (!entered) return fail(entered.error());
  fmt::print(stderr, "{}", render(faults));
  if (faults.any()) {
    const auto n = faults.count(Severity::fault);
    fmt::print(stderr, "{} fault{}: nothing of these files was taken in\n", n, n == 1 ? "" : "s");
    return exit_files;
  }
  store.value()->finish_upkeep();
  for (const std::string& news : store.value()->take_news()) tell(news);
  fmt::print("{}", render(entered.value()));
  return exit_go;
}

int trace(const TraceOptions& options) {
  if (options.serial.empty() && options.reel.empty())
    return fail({Error::Kind::usage, "trace needs a name", {}, "give --serial S or --reel R"});
  auto store = for_reading(options.store);
  if (!store) return fail(store.error());
  Database& database = store.value()->database();
  const Form as = form(options.csv, options.json);
  return options.serial.empty() ? print_answer(trace_reel(database, options.reel), as)
                                : print_answer(trace_serial(database, options.serial), as);
}

int show(const ShowOptions& options) {
  auto store = for_reading(options.store);
  if (!store) return fail(store.error());
  return print_answer(show_board(store.value()->database(), options.serial), form(options.csv, options.json));
}

int spread(const SpreadOptions& options) {
  auto store = for_reading(options.store);
  if (!store) return fail(store.error());
  Database& database = store.value()->database();
  SpreadAsked asked{options.step, options.metric, {}, options.all_trials};
  if (options.one_variant) asked.variant = options.variant;
  if (options.csv && !options.json) return spread_rows(database, asked);
  const auto answer = spread(database, asked);
  if (!answer.ok()) return fail(answer.error());
  fmt::print("{}", render(answer.value(), options.all_trials, options.json));
  return exit_go;
}

int audit(const AuditOptions& options) {
  auto store = for_reading(options.store);
  if (!store) return fail(store.error());
  const auto report = audit(store.value()->database());
  if (!report.ok()) return fail(report.error());
  fmt::print("{}", render(report.value(), options.store, options.json));
  return report.value().whole() ? exit_go : exit_store;
}

int log(const LogOptions& options) {
  auto store = for_reading(options.store);
  if (!store) return fail(store.error());
  const std::int64_t most = options.last > 0         ? options.last
                            : options.serial.empty() ? 40
                                                     : std::numeric_limits<std::int64_t>::max();
  const auto lines = read_log(store.value()->database(), options.serial, most);
  if (!lines.ok()) return fail(lines.error());
  fmt::print("{}", render(lines.value(), options.json));
  return exit_go;
}

int list_faults() {
  for (const std::string& line : fault_word_help()) fmt::print("{}\n", line);
  return exit_go;
}

}  // namespace jigwright
