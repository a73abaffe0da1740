#include "db/record_frames.hpp"

#include <fmt/format.h>

#include "db/digest.hpp"

namespace jigwright {

Result<std::string> RecordFrames::of(const ChainRow& record, std::unordered_set<std::string>& held) {
  const JournalRow& row = record.row;
  RecordCopy copy{record.station_uuid, record.station, row.epoch, row.seq, row.kind, row.uuid,
                  row.at_us,           record.hash,    {},        {}};
  add_body(record, copy);
  if (sha256(copy.body) != row.body_sha256)
    return Error{Error::Kind::store,
                 fmt::format("{} (station {}, epoch {}, record {}): the rows are not what was recorded",
                             record_word(row.kind), record.station, row.epoch, row.seq),
                 db_.path(),
                 {}};
  std::string out;
  if (static_cast<RecordKind>(row.kind) == RecordKind::trial)
    for (const Part* part : bodies_.parts()) add_part(*part, held, out);
  if (static_cast<RecordKind>(row.kind) == RecordKind::act) add_documents(held, out);  // an adopted revision names some
  return out + record_frame(copy);
}

void RecordFrames::add_body(const ChainRow& record, RecordCopy& copy) {
  const std::string& uuid = record.row.uuid;
  switch (static_cast<RecordKind>(record.row.kind)) {
    case RecordKind::trial: {
      const auto trial = bodies_.trial(uuid);
      if (!trial) break;
      copy.body = bodies_.bytes();
      Query q = db_.query("SELECT body FROM reading_blob WHERE trial = ?", trial->id);
      if (q.next()) copy.readings = q.text(0);
      break;
    }
    case RecordKind::list_entered: {
      const auto id = db_.first("SELECT id FROM entered WHERE uuid = ?", Blob{uuid}).value_or(0);
      bodies_.entered(id, id, [&](std::int64_t, std::string_view bytes) { copy.body += bytes; });
      break;
    }
    case RecordKind::epoch_begun:
      copy.body = bodies_.epoch_begun(uuid).value_or(std::string());
      break;
    case RecordKind::readings_archived:
      copy.body = bodies_.archived(uuid).value_or(std::string());
      break;
    case RecordKind::act:
      copy.body = bodies_.act(uuid).value_or(std::string());
      break;
  }
}

/// With a new part come all documents that the file has not: there are few, and the part may name one of them.
void RecordFrames::add_part(const Part& part, std::unordered_set<std::string>& held, std::string& out) {
  if (!held.insert(part.sha256).second) return;
  add_documents(held, out);
  out += part_frame(part.bytes);
}

void RecordFrames::add_documents(std::unordered_set<std::string>& held, std::string& out) {
  Query q = db_.query("SELECT sha256, kind, name, id FROM document");
  while (q.next()) {
    if (!held.insert(q.text(0)).second) continue;
    Query text = db_.query("SELECT body FROM document WHERE id = ?", q.integer(3));
    if (text.next()) out += document_frame({q.text(1), q.text(2), text.text(0)});
  }
}

}  // namespace jigwright
