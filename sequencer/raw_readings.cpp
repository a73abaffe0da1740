#include "sequencer/raw_readings.hpp"

#include <bit>

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

StoredRecord read_record(Bytes& in) {
  StoredRecord r;
  r.step = static_cast<int>(in.number());
  r.position = static_cast<int>(in.number()) - 1;
  r.record.ended = static_cast<Next>(in.number());
  r.record.started = Duration(in.signed_number());
  const std::uint64_t n = in.number();
  Duration at = r.record.started;
  for (std::uint64_t i = 0; i < n && !in.bad(); ++i) {
    Reading reading;
    reading.state = static_cast<ReadingState>(in.number());
    at += Duration(in.signed_number());
    reading.at = at;
    reading.value = in.real();
    r.record.readings.push_back(reading);
  }
  return r;
}

}  // namespace

std::string encode_readings(std::span<const SettingRecord> records, std::span<const Setting> settings) {
  std::string out;
  out.reserve(16 + records.size() * 96);
  put(out, records.size());
  for (const SettingRecord& r : records) {
    const Setting& s = settings[static_cast<std::size_t>(r.setting)];
    put(out, static_cast<std::uint64_t>(s.step));
    put(out, static_cast<std::uint64_t>(s.position + 1));
    put(out, static_cast<std::uint64_t>(r.ended));
    put_signed(out, r.started.count());
    put(out, r.readings.size());
    Duration at = r.started;
    for (const Reading& reading : r.readings) {
      put(out, static_cast<std::uint64_t>(reading.state));
      put_signed(out, (reading.at - at).count());
      at = reading.at;
      put_double(out, reading.value);
    }
  }
  return out;
}

Result<std::vector<StoredRecord>> decode_readings(std::string_view bytes) {
  const Error bad{
      Error::Kind::store, "stored readings are cut short or damaged", {}, "this trial can't be worked out again"};
  Bytes in(bytes);
  const std::uint64_t n = in.number();
  std::vector<StoredRecord> out;
  for (std::uint64_t i = 0; i < n && !in.bad(); ++i) out.push_back(read_record(in));
  for (const StoredRecord& r : out) {
    if (r.record.ended > Next::gave_up) return bad;
    for (const Reading& reading : r.record.readings)
      if (reading.state > ReadingState::refused) return bad;
  }
  if (in.bad() || !in.end()) return bad;
  return out;
}

}  // namespace jigwright
