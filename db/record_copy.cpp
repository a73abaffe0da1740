#include "db/record_copy.hpp"

#include <algorithm>

#include "db/canonical.hpp"
#include "db/digest.hpp"

namespace jigwright {
namespace {

constexpr std::string_view title = "jigwright records 1 ";
constexpr std::size_t digest_length = 32, length_length = 8;

std::string frame(char type, std::string_view payload) {
  Canonical out;
  out.mark(type).add(payload);
  return out.bytes() + sha256(out.bytes());
}

struct Frame {
  char type{};
  std::string_view payload;
  std::size_t length{};
};

/// nullopt when no whole and sound frame stands there.
std::optional<Frame> first_frame(std::string_view bytes) {
  CanonicalReader reader(bytes);
  Frame out;
  out.type = reader.mark();
  out.payload = reader.text();
  if (reader.failed()) return std::nullopt;
  const std::size_t hashed = 1 + length_length + out.payload.size();
  out.length = hashed + digest_length;
  if (bytes.size() < out.length || sha256(bytes.substr(0, hashed)) != bytes.substr(hashed, digest_length))
    return std::nullopt;
  return out;
}

std::optional<RecordCopy> record_of(std::string_view payload) {
  CanonicalReader r(payload);
  RecordCopy out;
  out.station_uuid = r.text();
  out.station = r.text();
  out.epoch = r.integer();
  out.seq = r.integer();
  out.kind = r.integer();
  out.uuid = r.text();
  out.at_us = r.integer();
  out.hash = r.text();
  out.body = r.text();
  out.readings = r.text();
  if (r.failed() || !r.at_end()) return std::nullopt;
  return out;
}

std::optional<Document> document_of(std::string_view payload) {
  CanonicalReader r(payload);
  Document out;
  out.kind = r.text();
  out.name = r.text();
  out.text = r.text();
  if (r.failed() || !r.at_end()) return std::nullopt;
  return out;
}

template <class Take>
std::size_t walk(std::string_view bytes, Take take) {
  std::size_t at = 0;
  while (const auto next = first_frame(bytes.substr(at))) {
    if (!take(*next)) break;
    at += next->length;
  }
  return at;
}

/// Where a sound frame stands; the length when there is none.
std::size_t sound_frame(std::string_view bytes) {
  std::size_t at = bytes.find_first_of("pdr");
  while (at != std::string_view::npos && !first_frame(bytes.substr(at))) at = bytes.find_first_of("pdr", at + 1);
  return std::min(at, bytes.size());
}

/// @param read  how many bytes of frames stand at the front
template <class Read>
FramesRead walk_all(std::string_view bytes, Read read) {
  FramesRead out;
  out.end = read(bytes);
  for (std::size_t at = out.end; at < bytes.size();) {
    at += 1 + sound_frame(bytes.substr(at + 1));
    if (at >= bytes.size()) break;
    const std::size_t length = read(bytes.substr(at));
    if (length == 0) continue;  // a frame of this program's whose payload is none
    out.skipped += at - out.end;
    out.end = at += length;
  }
  return out;
}

}  // namespace

std::string copies_head(std::string_view store_uuid) {
  return std::string(title) + hex(store_uuid) + "\n";
}

std::optional<std::size_t> head_length(std::string_view bytes, std::string_view store_uuid) {
  const std::size_t end = bytes.find('\n');
  if (!bytes.starts_with(title) || end != title.size() + 32) return std::nullopt;
  if (!store_uuid.empty() && bytes.substr(title.size(), 32) != hex(store_uuid)) return std::nullopt;
  return end + 1;
}

std::string part_frame(std::string_view bytes) {
  return frame('p', bytes);
}

std::string document_frame(const Document& document) {
  return frame('d', Canonical().add(document.kind).add(document.name).add(document.text).bytes());
}

std::string record_frame(const RecordCopy& r) {
  Canonical out;
  out.add(r.station_uuid).add(r.station).add(r.epoch).add(r.seq).add(r.kind).add(r.uuid).add(r.at_us).add(r.hash);
  return frame('r', out.add(r.body).add(r.readings).bytes());
}

std::size_t index_frames(std::string_view bytes, CopyIndex& index) {
  return walk(bytes, [&](const Frame& f) {
    if (f.type == 'p') index.held.insert(sha256(f.payload));
    if (f.type == 'd') {
      const auto document = document_of(f.payload);
      if (!document) return false;
      index.held.insert(sha256(document->text));
    }
    if (f.type != 'r') return true;
    const auto record = record_of(f.payload);
    if (!record) return false;
    index.chains[record->station_uuid][{record->epoch, record->seq}].insert(record->hash);
    return true;
  });
}

std::size_t read_frames(std::string_view bytes, CopySet& set) {
  return walk(bytes, [&](const Frame& f) {
    if (f.type == 'p') set.parts.emplace(sha256(f.payload), f.payload);
    if (f.type == 'd') {
      auto document = document_of(f.payload);
      if (!document) return false;
      set.documents.emplace(sha256(document->text), std::move(*document));
    }
    if (f.type != 'r') return true;
    auto record = record_of(f.payload);
    if (!record) return false;
    const std::pair at{ChainPlace{record->epoch, record->seq}, record->hash};
    set.chains[record->station_uuid].try_emplace(at, std::move(*record));  // the first has its raw readings still
    return true;
  });
}

FramesRead index_all_frames(std::string_view bytes, CopyIndex& index) {
  return walk_all(bytes, [&](std::string_view from) { return index_frames(from, index); });
}

FramesRead read_all_frames(std::string_view bytes, CopySet& set) {
  return walk_all(bytes, [&](std::string_view from) { return read_frames(from, set); });
}

}  // namespace jigwright
