// `backup`, `restore` and `archive`: what keeps a store's records when its file does not last.
#include <fmt/format.h>

#include <chrono>
#include <cstdio>
#include <optional>

#include "db/backup.hpp"
#include "db/copying.hpp"
#include "db/digest.hpp"
#include "db/readings_archive.hpp"
#include "db/store.hpp"
#include "db/week.hpp"
#include "station/audit_text.hpp"
#include "station/commands.hpp"
#include "station/exit_codes.hpp"
#include "station/fail.hpp"

namespace jigwright {
namespace {

std::string count(std::int64_t n, const char* one) {
  return fmt::format("{} {}{}", n, one, n == 1 ? "" : "s");
}

Error no_folder(const char* option) {
  return {Error::Kind::usage,
          "no folder for backups is known",
          {},
          fmt::format("give {} FOLDER, or write \"folder\" under [backups] in the station file", option)};
}

/// "2024-01-31" as UTC microseconds of its begin; nullopt when there is no such day.
std::optional<std::int64_t> day_us(const std::string& text) {
  using namespace std::chrono;
  int y = 0, m = 0, d = 0, used = 0;
  if (std::sscanf(text.c_str(), "%4d-%2d-%2d%n", &y, &m, &d, &used) != 3) return std::nullopt;
  const year_month_day day{year(y), month(static_cast<unsigned>(m)), std::chrono::day(static_cast<unsigned>(d))};
  if (used != static_cast<int>(text.size()) || !day.ok()) return std::nullopt;
  return duration_cast<microseconds>(sys_days(day).time_since_epoch()).count();
}

std::string restored_text(const Restored& r, const std::string& store) {
  std::string out = fmt::format("{} is made again from backup {} and {} copied since.\n", printable(store), r.backup,
                                count(r.added, "record"));
  for (const std::string& name : r.passed_over)
    out += fmt::format("Backup {} is newer and not whole: it was passed over.\n", name);
  for (const std::string& name : r.foreign)
    out += fmt::format("{} holds copies of another store: it was passed over.\n", name);
  for (const std::string& gap : r.gaps) out += "Copies end early: " + printable(gap) + ".\n";
  if (r.lost && *r.lost == 0) out += "Nothing that the damaged store had is missing.\n";
  if (r.lost && *r.lost > 0)
    out += fmt::format(
        "LOST: {} that the damaged store had. Boards tried since the last record below must be tried "
        "again.\n",
        count(*r.lost, "record"));
  if (!r.lost && !r.set_aside.empty())
    out +=
        "The damaged store can't be read far enough to tell whether anything is missing: compare the last boards "
        "below with what the line did since.\n";
  if (!r.set_aside.empty())
    out += fmt::format("What stood there lies in {}: keep it until you know what happened.\n", printable(r.set_aside));
  out += "Each chain goes on in a new epoch:\n";
  for (const ChainHead& h : r.heads)
    out +=
        printable(fmt::format("  station {}, epoch {}, record {}, {}:", h.station, h.epoch, h.seq, utc_text(h.at_us))) +
        "\n    " + hex(h.hash) + "\n";
  return out;
}

}  // namespace

int backup(const BackupOptions& options) {
  BackupPlan plan = options.backups;
  if (!options.folder.empty()) plan.folder = options.folder;
  if (plan.folder.empty()) return fail(no_folder("--to"));
  StoreOptions reading;
  reading.access = StoreOptions::Access::read;
  const auto store = Store::open(options.store, reading);
  if (!store) return fail(store.error());
  // Should this backup turn out bad one day, the one before it and the copies since restore as much.
  RecordCopies copies(store.value()->database(), plan.folder);
  if (const auto copied = copies.catch_up(); !copied) tell(describe(copied.error()));
  const auto made = make_backup(options.store, plan, utc_us());
  if (!made.ok()) return fail(made.error());
  if (!made.value().audit.whole()) {
    fmt::print("{}", render(made.value().audit, options.store, false));
    fmt::print("No backup was made of it.\n");
    return exit_store;
  }
  const auto all = backups_in(plan.folder);
  fmt::print("{}: {:.1f} MB, read back and whole: {}, {}.\n{} in {}, the newest {} are kept.\n",
             printable(made.value().path), static_cast<double>(made.value().bytes) / 1e6,
             count(made.value().audit.records, "record"), count(made.value().audit.trials, "trial"),
             count(static_cast<std::int64_t>(all.size()), "backup"), printable(plan.folder), plan.keep);
  return exit_go;
}

int restore(const RestoreOptions& options) {
  const std::string folder = options.folder.empty() ? options.backups.folder : options.folder;
  if (folder.empty()) return fail(no_folder("--from"));
  const auto restored = restore(options.store, folder, options.operator_name, utc_us());
  if (!restored.ok()) return fail(restored.error());
  fmt::print("{}", restored_text(restored.value(), options.store));
  const bool all = restored.value().lost.value_or(0) == 0 && restored.value().gaps.empty();
  return all ? exit_go : exit_store;
}

int archive(const ArchiveOptions& options) {
  const auto before_us = day_us(options.before);
  if (!before_us)
    return fail({Error::Kind::usage, fmt::format("\"{}\" is no date", printable(options.before)), "--before",
                 "write the day as in 2024-01-31; trials begun before it are archived"});
  StoreOptions writing;
  writing.create = false;
  const auto store = Store::open(options.store, writing);
  if (!store) return fail(store.error());
  tell(store.value()->notice());
  Archived all;
  for (int part = 1;; ++part) {
    const std::string file = part == 1 ? options.file : fmt::format("{}.{}", options.file, part);
    const auto step = archive_readings(store.value()->database(), store.value()->uuids(), file, *before_us,
                                       options.station_name, options.operator_name, utc_us());
    if (!step.ok()) return fail(step.error());
    if (step.value().trials == 0) break;
    all.trials += step.value().trials;
    all.bytes += step.value().bytes;
    fmt::print("{}: the records of {}, with {:.1f} MB of raw readings\n", printable(file),
               count(step.value().trials, "trial"), static_cast<double>(step.value().bytes) / 1e6);
  }
  if (all.trials == 0) {
    fmt::print("No trial before {} has raw readings in the store.\n", options.before);
    return exit_go;
  }
  fmt::print(
      "They are out of the store, and their hashes stand; \"audit --recompute\" can't work them out any more.\n");
  return exit_go;
}

}  // namespace jigwright
