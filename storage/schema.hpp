#pragma once

#include <cstdint>
#include <span>

#include "config/result.hpp"
#include "storage/sqlite.hpp"

namespace tramline::storage {

/// Marks an SQLite file as a logbook (PRAGMA application_id): "TrmL".
inline constexpr std::int64_t kApplicationId = 0x54726d4c;

/// What turns version n - 1 into version n is step n - 1 of the list. LOGBOOK.md describes the newest version
/// in words.
struct Migration {
  const char* sql;
};
[[nodiscard]] std::span<const Migration> migrations();

/// The newest version this program knows.
[[nodiscard]] inline std::int64_t newest_schema() {
  return static_cast<std::int64_t>(migrations().size());
}

/// Brings an open logbook from its version to the last of `steps`, each step in a transaction of its own.
[[nodiscard]] Status migrate(Database& database, std::span<const Migration> steps);

/// Whether the file is a logbook of a version this program knows; an Error says what it is instead.
[[nodiscard]] Status check_identity(const Database& database);

/// Whether the tables are those that `migrations()` makes, and nothing in the file runs by itself (views,
/// triggers). A stranger's table of one of our names could otherwise keep a reader busy for ever.
[[nodiscard]] Status check_tables(const Database& database);

}  // namespace tramline::storage
