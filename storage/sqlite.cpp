#include "storage/sqlite.hpp"

#include <sqlite3.h>

#include <cmath>
#include <filesystem>
#include <utility>

namespace tramline::storage {
namespace {

const char* remedy_for(int code) {
  switch (code & 0xff) {
    case SQLITE_FULL:
      return "the disk is full; make room";
    case SQLITE_READONLY:
    case SQLITE_PERM:
      return "it may not be written; check who owns it and how it is mounted";
    case SQLITE_CANTOPEN:
      return "check that the folder exists and may be written";
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
      return "another program is writing to it; try again";
    case SQLITE_IOERR:
      return "the storage device reports errors; check it";
    case SQLITE_CORRUPT:
      return "the file is damaged; keep a copy of it";
    case SQLITE_NOTADB:
      return "it is no logbook; name another file";
    default:
      return "";
  }
}

Error error_of(sqlite3* database, const std::string& path) {
  const int code = sqlite3_extended_errcode(database);
  return {path, sqlite3_errmsg(database), remedy_for(code)};
}

std::string path_of(sqlite3* database) {
  const char* name = sqlite3_db_filename(database, "main");
  return name != nullptr ? name : "logbook";
}

}  // namespace

void Statement::Finalise::operator()(sqlite3_stmt* statement) const {
  sqlite3_finalize(statement);
}

Statement& Statement::bind(int at, std::int64_t value) {
  sqlite3_bind_int64(statement_.get(), at, value);
  return *this;
}

Statement& Statement::bind(int at, double value) {
  if (std::isnan(value)) return bind_null(at);
  sqlite3_bind_double(statement_.get(), at, value);
  return *this;
}

Statement& Statement::bind(int at, std::string_view value) {
  sqlite3_bind_text64(statement_.get(), at, value.data(), value.size(), SQLITE_TRANSIENT, SQLITE_UTF8);
  return *this;
}

Statement& Statement::bind(int at, std::span<const std::uint8_t> blob) {
  sqlite3_bind_blob64(statement_.get(), at, blob.data(), blob.size(), SQLITE_TRANSIENT);
  return *this;
}

Statement& Statement::bind_null(int at) {
  sqlite3_bind_null(statement_.get(), at);
  return *this;
}

Result<bool> Statement::step() {
  const int code = sqlite3_step(statement_.get());
  if (code == SQLITE_ROW) return true;
  if (code == SQLITE_DONE) {
    sqlite3_reset(statement_.get());
    return false;
  }
  sqlite3* database = sqlite3_db_handle(statement_.get());
  Error error = error_of(database, path_of(database));
  sqlite3_reset(statement_.get());
  return error;
}

Status Statement::run() {
  for (;;) {
    const auto more = step();
    if (!more) return more.error();
    if (!more.value()) return kDone;
  }
}

std::int64_t Statement::integer(int column) const {
  return sqlite3_column_int64(statement_.get(), column);
}

double Statement::number(int column) const {
  return is_null(column) ? std::nan("") : sqlite3_column_double(statement_.get(), column);
}

std::string Statement::text(int column) const {
  const auto* text = reinterpret_cast<const char*>(sqlite3_column_text(statement_.get(), column));
  return text != nullptr
             ? std::string(text, static_cast<std::size_t>(sqlite3_column_bytes(statement_.get(), column)))
             : std::string();
}

std::span<const std::uint8_t> Statement::blob(int column) const {
  const auto* bytes = static_cast<const std::uint8_t*>(sqlite3_column_blob(statement_.get(), column));
  return {bytes,
          bytes != nullptr ? static_cast<std::size_t>(sqlite3_column_bytes(statement_.get(), column)) : 0};
}

bool Statement::is_null(int column) const {
  return sqlite3_column_type(statement_.get(), column) == SQLITE_NULL;
}

namespace {

/// The path as a URI that tells SQLite the file will not change.
std::string unchanging_name(const std::string& path) {
  static constexpr char kDigits[] = "0123456789ABCDEF";
  std::error_code code;
  const std::filesystem::path absolute = std::filesystem::absolute(path, code);
  std::string uri = "file://";
  for (const char c : code ? path : absolute.string()) {
    if (c != '%' && c != '?' && c != '#') {
      uri += c;
      continue;
    }
    const auto byte = static_cast<unsigned char>(c);
    uri += {'%', kDigits[byte >> 4U], kDigits[byte & 0xfU]};
  }
  return uri + "?immutable=1";
}

}  // namespace

void Database::Close::operator()(sqlite3* database) const {
  sqlite3_close_v2(database);
}

Result<Database> Database::open(const std::string& path, Mode mode) {
  sqlite3* raw = nullptr;
  const int flags =
      mode == Mode::read_write_create ? SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE : SQLITE_OPEN_READONLY;
  const bool unchanging = mode == Mode::read_unchanging;
  const std::string name = unchanging ? unchanging_name(path) : path;
  const int code = sqlite3_open_v2(name.c_str(), &raw,
                                   flags | SQLITE_OPEN_NOMUTEX | (unchanging ? SQLITE_OPEN_URI : 0), nullptr);
  Database database(raw, path);
  if (code != SQLITE_OK) {
    return raw != nullptr ? error_of(raw, path) : Error{path, "out of memory", ""};
  }
  sqlite3_busy_timeout(raw, 5000);
  sqlite3_extended_result_codes(raw, 1);
  // What a logbook from elsewhere may not do: run code, or be taken at its word about its own schema.
  sqlite3_db_config(raw, SQLITE_DBCONFIG_DEFENSIVE, 1, nullptr);
  sqlite3_db_config(raw, SQLITE_DBCONFIG_TRUSTED_SCHEMA, 0, nullptr);
  return database;
}

Status Database::execute(const std::string& sql) {
  if (sqlite3_exec(database_.get(), sql.c_str(), nullptr, nullptr, nullptr) != SQLITE_OK)
    return error_of(database_.get(), path_);
  return kDone;
}

Result<Statement> Database::prepare(std::string_view sql) const {
  sqlite3_stmt* raw = nullptr;
  if (sqlite3_prepare_v2(database_.get(), sql.data(), static_cast<int>(sql.size()), &raw, nullptr) !=
      SQLITE_OK) {
    return error_of(database_.get(), path_);
  }
  return Statement(raw);
}

Result<std::int64_t> Database::integer_of(const std::string& sql) const {
  auto statement = prepare(sql);
  if (!statement) return statement.error();
  const auto row = statement.value().step();
  if (!row) return row.error();
  return row.value() ? statement.value().integer(0) : 0;
}

std::int64_t Database::last_row_id() const {
  return sqlite3_last_insert_rowid(database_.get());
}

bool Database::failed_of_damage() const {
  const int code = sqlite3_errcode(database_.get()) & 0xff;
  return code == SQLITE_CORRUPT || code == SQLITE_NOTADB;
}

bool Database::failed_of_row() const {
  const int code = sqlite3_errcode(database_.get()) & 0xff;
  return code == SQLITE_CONSTRAINT || code == SQLITE_TOOBIG || code == SQLITE_MISMATCH;
}

bool Database::failed_of_access() const {
  const int code = sqlite3_errcode(database_.get()) & 0xff;
  return code == SQLITE_CANTOPEN || code == SQLITE_READONLY || code == SQLITE_PERM;
}

Result<Transaction> Transaction::begin(Database& database) {
  if (auto begun = database.execute("BEGIN IMMEDIATE"); !begun) return begun.error();
  return Transaction(database);
}

Transaction::~Transaction() {
  if (database_ != nullptr) (void)database_->execute("ROLLBACK");
}

Status Transaction::commit() {
  auto committed = database_->execute("COMMIT");
  if (committed) database_ = nullptr;
  return committed;
}

}  // namespace tramline::storage
