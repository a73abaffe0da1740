// How fast and how large the store is, with an invented factory: trials logged beside a bare SQLite program that writes
// the same rows in the same transactions, bytes and log pages a board, a reel's serials and one metric of every board
// beside SQL written by hand, an audit. Figures, not tests. Takes the number of boards (20,000 without it) and a folder
// for its files.
#include <fmt/format.h>

#include <algorithm>
#include <chrono>
#include <cstdlib>
#include <ctime>
#include <filesystem>
#include <functional>

#include "db/audit.hpp"
#include "db/bodies.hpp"
#include "db/columns.hpp"
#include "db/journal.hpp"
#include "db/sqlite.hpp"
#include "tests/db/bare_store.hpp"
#include "tests/db/factory.hpp"

using namespace jigwright;
namespace fs = std::filesystem;

namespace {

constexpr std::int64_t round_boards = 250;    ///< that store and bare program log in turn
constexpr std::int64_t compared_rounds = 20;  ///< spread over the whole run

double now_s() {
  return std::chrono::duration<double>(std::chrono::steady_clock::now().time_since_epoch()).count();
}

double cpu_s() {
  timespec t{};
  clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &t);
  return static_cast<double>(t.tv_sec) + static_cast<double>(t.tv_nsec) * 1e-9;
}

struct Side {
  double wall_s{0}, cpu_s{0};
};

/// What follows each trial, once it has been answered.
struct Upkeep {
  double wall_s{0}, longest_s{0};
  std::int64_t pages{0};
};

[[noreturn]] void give_up(const std::string& what) {
  fmt::print(stderr, "{}\n", what);
  std::exit(1);
}

void keep(Store& store, const room::WalPages& pages, Upkeep& upkeep) {
  const double began_s = now_s();
  const std::int64_t before = pages.total();
  store.upkeep();
  const double took_s = now_s() - began_s;
  upkeep.wall_s += took_s;
  upkeep.longest_s = std::max(upkeep.longest_s, took_s);
  upkeep.pages += pages.total() - before;
}

/// What the store's two calls take for boards first .. last.
Side log(Store& store, const room::Factory& factory, std::int64_t first, std::int64_t last, const room::WalPages& pages,
         Upkeep& upkeep) {
  Side out;
  for (std::int64_t board = first; board <= last; ++board) {
    const TrialStart start = factory.start(board);
    const TrialEnd end = factory.end(board);
    const double began_s = now_s(), began_cpu_s = cpu_s();
    const auto open = store.begin_trial(start);
    if (!open) give_up(describe(open.error()));
    if (const auto done = store.finish_trial(open.value(), end); !done) give_up(describe(done.error()));
    out.wall_s += now_s() - began_s;
    out.cpu_s += cpu_s() - began_cpu_s;
    keep(store, pages, upkeep);
  }
  return out;
}

double median_s(int times, const std::function<void()>& work) {
  std::vector<double> all;
  for (int i = 0; i < times; ++i) {
    const double began_s = now_s();
    work();
    all.push_back(now_s() - began_s);
  }
  std::sort(all.begin(), all.end());
  return all[all.size() / 2];
}

/// What the chain takes of a trial's logging: its row's mark, its body from the rows just written, its hash, its row of
/// the journal. Taken back at the end.
double chain_s(Database& database) {
  constexpr int most = 2000;
  std::vector<std::pair<std::string, std::int64_t>> trials;
  {
    Query q = database.query("SELECT uuid, id FROM trial ORDER BY id DESC LIMIT ?", most);
    while (q.next()) trials.emplace_back(q.text(0), q.integer(1));
  }
  std::vector<std::vector<Bodies::Row>> findings;
  for (const auto& [uuid, id] : trials) {
    findings.emplace_back();
    Query q =
        database.query("SELECT metric, value, u, n, state, verdict FROM finding WHERE trial = ? ORDER BY metric", id);
    while (q.next())
      findings.back().push_back(
          {q.integer(0), q.maybe_real(1), q.maybe_real(2), q.integer(3), q.integer(4), q.integer(5)});
  }
  Bodies bodies(database);
  const Transaction dropped(database, Transaction::Kind::write);
  const double began_s = cpu_s();
  for (std::size_t i = 0; i < trials.size(); ++i) {
    const auto& [uuid, id] = trials[i];
    const auto marked = bodies.trial(uuid, std::vector<Bodies::Row>());
    database.run("UPDATE trial SET mark = ? WHERE id = ?", Blob{marked->sha256}, id);
    const auto body = bodies.trial(uuid, std::move(findings[i]));
    append_record(database, body->station, RecordKind::trial, uuid, 0, body->sha256);
  }
  return (cpu_s() - began_s) / static_cast<double>(trials.size());
}

double megabytes(std::uintmax_t bytes) {
  return static_cast<double>(bytes) / 1e6;
}

/// Only the compared rounds need a durable disk: the pages that a board writes are the same without, and a million
/// boards are logged in minutes.
void durable(Store& store, bool yes) {
  store.database().script(yes ? "PRAGMA synchronous = FULL" : "PRAGMA synchronous = OFF");
}

void logging(Store& store, const room::Factory& factory, const std::string& path, const std::string& bare_path) {
  room::BareStore bare(bare_path, path);
  room::WalPages pages(store.database().handle());
  const std::int64_t rounds = factory.boards() / round_boards;
  const std::int64_t every = std::max<std::int64_t>(1, rounds / compared_rounds);
  Side ours, theirs;
  Upkeep upkeep;
  double floor_s = 0;
  const std::int64_t early = rounds >= 80 ? 40 : 8;  // rounds before the first look at the pages
  std::int64_t early_pages = 0, late_pages = 0, compared = 0;
  std::vector<double> ratios;
  for (std::int64_t i = 0; i < rounds; ++i) {
    const bool compares = i > 0 && i % every == 0;  // the first warms up
    const std::int64_t first = i * round_boards, before = pages.total() - upkeep.pages;
    durable(store, compares);
    const Side logged = log(store, factory, first, first + round_boards - 1, pages, upkeep);
    const std::int64_t written = pages.total() - upkeep.pages - before;
    if (i >= early - 4 && i < early) early_pages += written;
    if (i >= rounds - 4) late_pages += written;
    if (!compares) continue;
    bare.load(first + 1, first + round_boards);
    const double began_cpu_s = cpu_s();
    const double bare_s = bare.log();
    theirs.cpu_s += cpu_s() - began_cpu_s;
    theirs.wall_s += bare_s;
    ours.wall_s += logged.wall_s;
    ours.cpu_s += logged.cpu_s;
    floor_s += bare.bare_commits_s(200) / 100;
    ratios.push_back(bare_s / logged.wall_s);
    ++compared;
  }
  durable(store, true);
  if (!bare.sound()) give_up("the bare program failed");
  std::sort(ratios.begin(), ratios.end());
  const auto trials = static_cast<double>(compared * round_boards);
  fmt::print("logging, each trial durable at its begin and at its end ({} rounds of {} trials in turn):\n", compared,
             round_boards);
  fmt::print("  {:.0f} trials a second; a bare SQLite program with the same rows and transactions: {:.0f}\n",
             trials / ours.wall_s, trials / theirs.wall_s);
  fmt::print("  ratio {:.2f} of the bare program in all; by rounds: median {:.2f}, {:.2f} to {:.2f}\n",
             theirs.wall_s / ours.wall_s, ratios[ratios.size() / 2], ratios.front(), ratios.back());
  fmt::print("  a trial takes {:.2f} ms, of it {:.2f} ms of the processor; a bare one {:.2f} ms and {:.2f} ms\n",
             1e3 * ours.wall_s / trials, 1e3 * ours.cpu_s / trials, 1e3 * theirs.wall_s / trials,
             1e3 * theirs.cpu_s / trials);
  const double chain = chain_s(store.database());
  fmt::print("  of it the chain {:.3f} ms: {:.1f} % of what a trial takes, {:.1f} % of its processor time\n",
             1e3 * chain, 100 * chain * trials / ours.wall_s, 100 * chain * trials / ours.cpu_s);
  fmt::print("  the disk's floor, in the same rounds: two durable commits of one row take {:.2f} ms\n",
             1e3 * floor_s / static_cast<double>(compared));
  const double thousand = 4.0 * static_cast<double>(round_boards);
  fmt::print("  pages of the write-ahead log a board: {:.1f} at {} boards, {:.1f} at {} boards\n",
             static_cast<double>(early_pages) / thousand, early * round_boards,
             static_cast<double>(late_pages) / thousand, rounds * round_boards);
  const auto boards = static_cast<double>(rounds * round_boards);
  fmt::print("upkeep of column blocks after a trial: {:.1f} us and {:.2f} pages a trial, {:.0f} ms at the longest\n",
             1e6 * upkeep.wall_s / boards, static_cast<double>(upkeep.pages) / boards, 1e3 * upkeep.longest_s);
}

void size(Store& store, const std::string& path, std::uintmax_t lists_bytes, std::int64_t boards) {
  store.database().script("PRAGMA wal_checkpoint(TRUNCATE)");
  const auto blocks =
      static_cast<double>(store.database().first("SELECT sum(length(body)) FROM column_block").value_or(0));
  const auto raw =
      static_cast<double>(store.database().first("SELECT sum(length(body)) FROM reading_blob").value_or(0));
  const std::uintmax_t all = fs::file_size(path);
  const auto n = static_cast<double>(boards);
  fmt::print(
      "size: {:.1f} MB; a board {:.0f} B of raw readings and {:.0f} B beside them, of which lists {:.0f} B and column "
      "blocks {:.0f} B\n",
      megabytes(all), raw / n, (static_cast<double>(all) - raw) / n, static_cast<double>(lists_bytes) / n, blocks / n);
}

/// One metric of every board, as a question reads it.
void one_metric(const std::string& path, const room::Factory& factory) {
  StoreOptions reading;
  reading.access = StoreOptions::Access::read;
  const auto opened = Store::open(path, reading);
  if (!opened) give_up(describe(opened.error()));
  Database& database = opened.value()->database();
  const MetricName name = factory.end(0).findings.back().metric.name;
  double sum = 0, sum_by_hand = 0;
  const double read_s = median_s(11, [&] {
    const auto columns = read_metric(database, name.step, name.name, name.variant);
    if (!columns) give_up(describe(columns.error()));
    sum = 0;
    for (const double value : columns.value().values) sum += value;
  });
  const double sql_s = median_s(3, [&] {
    std::vector<double> values;
    Query q = database.query(
        "SELECT t.id, f.value, f.state, f.verdict, t.attempt FROM metric m CROSS JOIN trial t JOIN finding f ON "
        "f.trial = t.id AND f.metric = m.id WHERE m.step = ? AND m.name = ? AND m.variant = ? ORDER BY t.id",
        name.step, name.name, name.variant);
    while (q.next()) values.push_back(q.real(1));
    sum_by_hand = 0;
    for (const double value : values) sum_by_hand += value;
  });
  if (sum != sum_by_hand) give_up("blocks and rows give different values");
  fmt::print(
      "one metric of {} boards: {:.1f} ms from column blocks, {:.0f} ms by hand-written SQL over rows, ratio {:.4f}; "
      "{:.1f} ms a million boards\n",
      factory.boards(), 1e3 * read_s, 1e3 * sql_s, read_s / sql_s,
      1e9 * read_s / static_cast<double>(factory.boards()));
}

void auditing(Store& store, std::int64_t boards) {
  const double began_s = now_s(), began_cpu_s = cpu_s();
  const auto report = audit(store.database());
  if (!report) give_up(describe(report.error()));
  if (!report.value().whole()) give_up("the audit found: " + sentence(report.value().differences[0]));
  const double took_s = now_s() - began_s, took_cpu_s = cpu_s() - began_cpu_s;
  double blocks_s = now_s();
  check_blocks(store.database(), [](std::string what) { give_up(what); });
  blocks_s = now_s() - blocks_s;
  fmt::print(
      "audit: {:.0f} boards a second, {:.0f} a second of the processor; of its {:.1f} s column blocks take {:.1f} s\n",
      static_cast<double>(boards) / took_s, static_cast<double>(boards) / took_cpu_s, took_s, blocks_s);
}

void tracing(Store& store, const room::Factory& factory) {
  const int place = 15;  // a resistor: the longest reels
  const std::string reel = factory.reel(place, 0);
  std::size_t found = 0, by_hand = 0;
  const double trace_s = median_s(21, [&] {
    const auto trace = store.trace_reel(reel);
    if (!trace) give_up(describe(trace.error()));
    found = trace.value().boards.size();
  });
  const double sql_s = median_s(21, [&] {
    by_hand = 0;
    Query q = store.database().query(
        "SELECT b.serial, d.build_no, d.panel, f.designator, t.judgement, t.at_us FROM reel r "
        "JOIN feed f ON f.reel = r.id JOIN build d ON d.ord = f.ord AND d.build_no BETWEEN f.poss_from AND f.poss_to "
        "JOIN board b ON b.id = d.board LEFT JOIN trial t ON t.board = b.id AND t.counts = 1 "
        "WHERE r.name = ? AND f.dropped_us IS NULL ORDER BY d.ord, d.build_no",
        reel);
    for (; q.next(); ++by_hand) q.text(0);
  });
  if (found != by_hand) give_up(fmt::format("the trace found {} boards, the SQL {}", found, by_hand));
  fmt::print("a reel's {} serials: {:.2f} ms, by hand-written SQL {:.2f} ms, ratio {:.2f}\n", found, 1e3 * trace_s,
             1e3 * sql_s, trace_s / sql_s);
}

}  // namespace

int main(int argc, char** argv) {
  room::FactoryOptions options;
  options.boards = argc > 1 ? std::atoll(argv[1]) : 20'000;
  options.boards -= options.boards % round_boards;
  if (options.boards < 3000) give_up("name at least 3000 boards");
  std::string folder = ((argc > 2 ? fs::path(argv[2]) : fs::temp_directory_path()) / "store-benchmark-XXXXXX").string();
  if (mkdtemp(folder.data()) == nullptr) give_up("can't make a folder for the files");
  const room::Factory factory(options);
  const std::string path = folder + "/store.db";
  const double began_s = now_s();
  {
    auto opened = Store::open(path);
    if (!opened) give_up(describe(opened.error()));
    Store& store = *opened.value();
    const double lists_began_s = now_s();
    if (const auto entered = factory.enter_all(store); !entered) give_up(describe(entered.error()));
    store.database().script("PRAGMA wal_checkpoint(TRUNCATE)");
    const std::uintmax_t lists_bytes = fs::file_size(path);
    fmt::print("{} boards x {} findings and {} readings; lists entered in {:.2f} s\n", options.boards, options.findings,
               options.readings, now_s() - lists_began_s);
    logging(store, factory, path, folder + "/bare.db");
    size(store, path, lists_bytes, options.boards);
    tracing(store, factory);
    one_metric(path, factory);
    auditing(store, options.boards);
  }
  fmt::print("all that took {:.0f} s\n", now_s() - began_s);
  std::error_code ignored;
  fs::remove_all(folder, ignored);
  return 0;
}
