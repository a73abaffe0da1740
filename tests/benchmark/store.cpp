// How fast and how large the store is, with an invented factory: trials logged beside a bare SQLite program that writes
// the same rows in the same transactions, bytes and log pages a board, a reel's serials beside SQL written by hand.
// Figures, not tests. Takes the number of boards (20,000 without it) and a folder for its files.
#include <fmt/format.h>

#include <algorithm>
#include <chrono>
#include <cstdlib>
#include <ctime>
#include <filesystem>
#include <functional>

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

[[noreturn]] void give_up(const std::string& what) {
  fmt::print(stderr, "{}\n", what);
  std::exit(1);
}

/// What the store's two calls take for boards first .. last.
Side log(Store& store, const room::Factory& factory, std::int64_t first, std::int64_t last) {
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

double megabytes(std::uintmax_t bytes) {
  return static_cast<double>(bytes) / 1e6;
}

;

void logging(Store& store, const room::Factory& factory, const std::string& path, const std::string& bare_path) {
  room::BareStore bare(bare_path, path);
  room::WalPages pages(store.database().handle());
  const std::int64_t rounds = factory.boards() / round_boards;
  const std::int64_t every = std::max<std::int64_t>(1, rounds / compared_rounds);
  Side ours, theirs;
  double floor_s = 0;
  std::int64_t early_pages = 0, late_pages = 0, compared = 0;
  std::vector<double> ratios;
  for (std::int64_t i = 0; i < rounds; ++i) {
    const std::int64_t first = i * round_boards, before = pages.total();
    const Side logged = log(store, factory, first, first + round_boards - 1);
    if (i >= 4 && i < 8) early_pages += pages.total() - before;
    if (i >= rounds - 4) late_pages += pages.total() - before;
    if (i == 0 || i % every != 0) continue;  // the first warms up
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
  fmt::print("  the disk's floor, in the same rounds: two durable commits of one row take {:.2f} ms\n",
             1e3 * floor_s / static_cast<double>(compared));
  const double thousand = 4.0 * static_cast<double>(round_boards);
  fmt::print("  pages of the write-ahead log a board: {:.1f} at 2000 boards, {:.1f} at {} boards\n",
             static_cast<double>(early_pages) / thousand, static_cast<double>(late_pages) / thousand,
             rounds * round_boards);
}

void size(Store& store, const std::string& path, std::uintmax_t lists_bytes, std::int64_t boards) {
  store.database().script("PRAGMA wal_checkpoint(TRUNCATE)");
  const auto raw =
      static_cast<double>(store.database().first("SELECT sum(length(body)) FROM reading_blob").value_or(0));
  const std::uintmax_t all = fs::file_size(path);
  const auto n = static_cast<double>(boards);
  fmt::print("size: {:.1f} MB; a board {:.0f} B of raw readings and {:.0f} B beside them, of which lists {:.0f} B\n",
             megabytes(all), raw / n, (static_cast<double>(all) - raw) / n, static_cast<double>(lists_bytes) / n);
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
  }
  fmt::print("all that took {:.0f} s\n", now_s() - began_s);
  std::error_code ignored;
  fs::remove_all(folder, ignored);
  return 0;
}
