#include "sequencer/raw_readings.hpp"

#include <algorithm>
#include <bit>
#include <cmath>
#include <optional>

namespace jigwright {
namespace {

void put(std::string& out, std::uint64_t v) {
  while (v >= 0x80) {
    out.push_back(static_cast<char>(v | 0x80));
    v >>= 7;
  }
  out.push_back(static_cast<char>(v));
}

void put_signed(std::string& out, std::int64_t v) {
  put(out, (static_cast<std::uint64_t>(v) << 1) ^ static_cast<std::uint64_t>(v >> 63));
}

void put_double(std::string& out, double v) {
  const auto bits = std::bit_cast<std::uint64_t>(v);
  for (int i = 0; i < 8; ++i) out.push_back(static_cast<char>(bits >> (8 * i)));
}

class Bytes {
 public:
  explicit Bytes(std::string_view bytes) : bytes_(bytes) {}
  bool bad() const { return bad_; }
  bool end() const { return bytes_.empty(); }
  std::uint64_t number() {
    std::uint64_t v = 0;
    for (int shift = 0; shift < 64; shift += 7) {
      if (bytes_.empty()) break;
      const auto byte = static_cast<unsigned char>(bytes_.front());
      bytes_.remove_prefix(1);
      v |= static_cast<std::uint64_t>(byte & 0x7fu) << shift;
      if (byte < 0x80) return v;
    }
    bad_ = true;
    return 0;
  }
  std::int64_t signed_number() {
    const std::uint64_t v = number();
    return static_cast<std::int64_t>(v >> 1) ^ -static_cast<std::int64_t>(v & 1);
  }
  double real() {
    if (bytes_.size() < 8) {
      bad_ = true;
      return 0;
    }
    std::uint64_t bits = 0;
    for (unsigned i = 0; i < 8; ++i)
      bits |= static_cast<std::uint64_t>(static_cast<unsigned char>(bytes_[i])) << (8 * i);
    bytes_.remove_prefix(8);
    return std::bit_cast<double>(bits);
  }
  std::size_t left() const { return bytes_.size(); }

 private:
  std::string_view bytes_;
  bool bad_{false};
};

/// How a record's values are kept.
enum class Kept : std::uint8_t { numbers = 0, times_scale = 1, over_inverse = 2 };

struct Scale {
  double step{};     ///< the meter's resolution
  double inverse{};  ///< its inverse as a whole number, or 0
};

double value_of(std::int64_t count, Kept kept, const Scale& scale) {
  const auto n = static_cast<double>(count);
  return kept == Kept::over_inverse ? n / scale.inverse : n * scale.step;
}

Scale scale_of(double step) {
  Scale s{step, 0};
  if (step > 0 && step < 1) s.inverse = std::nearbyint(1 / step);
  return s;
}

/// The count that gives the value back to the last bit, if there is one.
std::optional<std::int64_t> count_of(double value, Kept kept, const Scale& scale) {
  const double n = std::nearbyint(kept == Kept::over_inverse ? value * scale.inverse : value / scale.step);
  if (!(std::abs(n) < 1e15)) return std::nullopt;
  const auto count = static_cast<std::int64_t>(n);
  const double back = value_of(count, kept, scale);
  // -0 is not 0: compare the bits.
  if (std::bit_cast<std::uint64_t>(back) != std::bit_cast<std::uint64_t>(value)) return std::nullopt;
  return count;
}

std::optional<std::vector<std::int64_t>> counts_of(std::span<const Reading> readings, Kept kept, const Scale& scale) {
  std::vector<std::int64_t> out;
  for (const Reading& r : readings) {
    const auto count = count_of(r.value, kept, scale);
    if (!count) return std::nullopt;
    out.push_back(*count);
  }
  return out;
}

/// The meter's resolution for this setting; 0 where it is not the meter that reads.
double resolution(const Setting& setting, const Jig& jig) {
  const auto* meter = std::get_if<ReadMeter>(&setting.act);
  return meter == nullptr ? 0 : jig.accuracy(meter->setup).resolution;
}

class Writer {
 public:
  Writer(std::span<const Setting> settings, const Jig& jig) : settings_(settings), jig_(jig) {}

  std::string write(std::span<const SettingRecord> records) {
    for (const SettingRecord& r : records) add(r);
    std::string head;
    put(head, scales_.size());
    for (const double s : scales_) put_double(head, s);
    put(head, records.size());
    return head + body_;
  }

 private:
  void add(const SettingRecord& r) {
    const Setting& s = settings_[static_cast<std::size_t>(r.setting)];
    const double step = resolution(s, jig_);
    Kept kept = Kept::numbers;
    std::optional<std::vector<std::int64_t>> counts;
    for (const Kept how : {Kept::times_scale, Kept::over_inverse}) {
      if (counts || !(step > 0)) break;
      if (how == Kept::over_inverse && !(scale_of(step).inverse > 0)) break;
      counts = counts_of(r.readings, how, scale_of(step));
      if (counts) kept = how;
    }
    const bool all_ok =
        std::all_of(r.readings.begin(), r.readings.end(), [](const Reading& x) { return x.state == ReadingState::ok; });
    put(body_, static_cast<std::uint64_t>(s.step));
    put(body_, static_cast<std::uint64_t>(s.position + 1));
    put(body_, static_cast<std::uint64_t>(r.ended) | (all_ok ? 4u : 0u) | (static_cast<std::uint64_t>(kept) << 3));
    if (kept != Kept::numbers) put(body_, place_of(step));
    put_signed(body_, (r.started - started_).count());
    started_ = r.started;
    put(body_, r.readings.size());
    add_readings(r, all_ok, counts);
  }

  void add_readings(const SettingRecord& r, bool all_ok, const std::optional<std::vector<std::int64_t>>& counts) {
    std::int64_t at = r.started.count(), gap = 0, count = 0;
    for (std::size_t i = 0; i < r.readings.size(); ++i) {
      const Reading& reading = r.readings[i];
      if (!all_ok) put(body_, static_cast<std::uint64_t>(reading.state));
      const std::int64_t next_gap = reading.at.count() - at;
      put_signed(body_, next_gap - gap);
      gap = next_gap;
      at = reading.at.count();
      if (!counts) {
        put_double(body_, reading.value);
        continue;
      }
      put_signed(body_, (*counts)[i] - count);
      count = (*counts)[i];
    }
  }

  std::size_t place_of(double step) {
    const auto at = std::find(scales_.begin(), scales_.end(), step);
    if (at != scales_.end()) return static_cast<std::size_t>(at - scales_.begin());
    scales_.push_back(step);
    return scales_.size() - 1;
  }

  std::span<const Setting> settings_;
  const Jig& jig_;
  std::vector<double> scales_;
  std::string body_;
  Duration started_{};
};

class Reader {
 public:
  explicit Reader(std::string_view bytes) : in_(bytes) {}

  std::optional<std::vector<StoredRecord>> read() {
    const std::uint64_t scales = in_.number();
    for (std::uint64_t i = 0; i < scales && !in_.bad(); ++i) scales_.push_back(scale_of(in_.real()));
    const std::uint64_t records = in_.number();
    std::vector<StoredRecord> out;
    for (std::uint64_t i = 0; i < records && !in_.bad(); ++i) out.push_back(record());
    if (in_.bad() || !in_.end() || bad_) return std::nullopt;
    return out;
  }

 private:
  StoredRecord record() {
    StoredRecord r;
    r.step = static_cast<int>(in_.number());
    r.position = static_cast<int>(in_.number()) - 1;
    const std::uint64_t flags = in_.number();
    bad_ = bad_ || (flags & 3u) > 2 || flags >> 3 > 2;
    r.record.ended = static_cast<Next>(flags & 3u);
    const auto kept = static_cast<Kept>(flags >> 3 & 3u);
    const std::size_t place = kept == Kept::numbers ? 0 : in_.number();
    if (kept != Kept::numbers && place >= scales_.size()) bad_ = true;
    started_ = wrapped(started_, in_.signed_number());
    r.record.started = Duration(started_);
    const std::uint64_t n = in_.number();
    // A reading takes two bytes at least: a count that the bytes can't hold is damage, not a size to reserve.
    if (bad_ || n > in_.left()) {
      bad_ = true;
      return r;
    }
    const Scale scale = kept == Kept::numbers ? Scale{} : scales_[place];
    readings(r.record, n, (flags & 4u) != 0, kept, scale);
    return r;
  }

  void readings(SettingRecord& record, std::uint64_t n, bool all_ok, Kept kept, const Scale& scale) {
    std::int64_t at = record.started.count(), gap = 0, count = 0;
    for (std::uint64_t i = 0; i < n && !in_.bad(); ++i) {
      Reading r;
      const std::uint64_t state = all_ok ? 0 : in_.number();
      bad_ = bad_ || state > static_cast<std::uint64_t>(ReadingState::refused);
      r.state = static_cast<ReadingState>(state);
      gap = wrapped(gap, in_.signed_number());
      at = wrapped(at, gap);
      r.at = Duration(at);
      if (kept == Kept::numbers) {
        r.value = in_.real();
      } else {
        count = wrapped(count, in_.signed_number());
        r.value = value_of(count, kept, scale);
      }
      record.readings.push_back(r);
    }
  }

  /// Damaged bytes may hold any number: a sum that wraps is no worse than any other wrong one, and no overflow.
  static std::int64_t wrapped(std::int64_t a, std::int64_t b) {
    return static_cast<std::int64_t>(static_cast<std::uint64_t>(a) + static_cast<std::uint64_t>(b));
  }

  Bytes in_;
  std::vector<Scale> scales_;
  std::int64_t started_{0};
  bool bad_{false};
};

}  // namespace

std::string encode_readings(std::span<const SettingRecord> records, std::span<const Setting> settings, const Jig& jig) {
  return Writer(settings, jig).write(records);
}

Result<std::vector<StoredRecord>> decode_readings(std::string_view bytes) {
  auto records = Reader(bytes).read();
  if (records) return std::move(*records);
  return Error{
      Error::Kind::store, "stored readings are cut short or damaged", {}, "this trial can't be worked out again"};
}

}  // namespace jigwright
