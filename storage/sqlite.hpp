#pragma once

#include <cstdint>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <string_view>

#include "config/result.hpp"

struct sqlite3;
struct sqlite3_stmt;

/// A thin layer over SQLite's C interface: handles that close themselves, errors that are values, NaN as
/// NULL.
namespace tramline::storage {

/// A prepared statement. Binds by position from 1, reads columns from 0. Belongs to its Database's thread.
class Statement {
 public:
  Statement() = default;

  Statement& bind(int at, std::int64_t value);
  Statement& bind(int at, double value);  ///< NaN is bound as NULL
  Statement& bind(int at, std::string_view value);
  Statement& bind(int at, std::span<const std::uint8_t> blob);
  Statement& bind_null(int at);

  /// Runs to the end and is ready to be bound again.
  [[nodiscard]] Status run();
  /// true: a row can be read; false: there are no more, and the statement is ready to be bound again.
  [[nodiscard]] Result<bool> step();

  [[nodiscard]] std::int64_t integer(int column) const;
  [[nodiscard]] double number(int column) const;  ///< NULL is NaN
  [[nodiscard]] std::string text(int column) const;
  [[nodiscard]] std::span<const std::uint8_t> blob(int column) const;  ///< until the next step
  [[nodiscard]] bool is_null(int column) const;

 private:
  friend class Database;
  struct Finalise {
    void operator()(sqlite3_stmt* statement) const;
  };
  explicit Statement(sqlite3_stmt* statement) : statement_(statement) {}
  std::unique_ptr<sqlite3_stmt, Finalise> statement_;
};

/// An open database. One thread at a time.
class Database {
 public:
  enum class Mode {
    read_only,
    read_unchanging,  ///< needs no file beside it and takes no lock: only while nobody writes
    read_write_create,
  };
  [[nodiscard]] static Result<Database> open(const std::string& path, Mode mode);

  [[nodiscard]] Status execute(const std::string& sql);
  [[nodiscard]] Result<Statement> prepare(std::string_view sql) const;
  /// The single integer a query gives, such as a PRAGMA's.
  [[nodiscard]] Result<std::int64_t> integer_of(const std::string& sql) const;
  [[nodiscard]] std::int64_t last_row_id() const;
  /// What the call that failed just now failed of: the file itself is damaged or no SQLite; the one row does
  /// not fit (others will); the file, or one beside it, cannot be opened or written.
  [[nodiscard]] bool failed_of_damage() const;
  [[nodiscard]] bool failed_of_row() const;
  [[nodiscard]] bool failed_of_access() const;
  [[nodiscard]] const std::string& path() const { return path_; }

 private:
  struct Close {
    void operator()(sqlite3* database) const;
  };
  Database(sqlite3* database, std::string path) : database_(database), path_(std::move(path)) {}
  std::unique_ptr<sqlite3, Close> database_;
  std::string path_;
};

/// Begins a transaction; rolls it back when it goes out of scope without `commit()`.
class Transaction {
 public:
  [[nodiscard]] static Result<Transaction> begin(Database& database);
  Transaction(Transaction&& other) noexcept : database_(std::exchange(other.database_, nullptr)) {}
  Transaction& operator=(Transaction&&) = delete;
  ~Transaction();
  [[nodiscard]] Status commit();

 private:
  explicit Transaction(Database& database) : database_(&database) {}
  Database* database_;
};

}  // namespace tramline::storage
