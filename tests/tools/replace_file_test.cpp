#include "tools/replace_file.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <sys/stat.h>

#include <filesystem>
#include <fstream>
#include <iterator>
#include <string>

namespace tramline::tools {
namespace {

namespace fs = std::filesystem;

class ReplaceFile : public ::testing::Test {
 protected:
  ReplaceFile() {
    const auto* test = ::testing::UnitTest::GetInstance()->current_test_info();
    folder_ = fs::path(::testing::TempDir()) / (std::string("tramline-replace-") + test->name());
    fs::remove_all(folder_);
    fs::create_directories(folder_);
  }
  ~ReplaceFile() override { fs::remove_all(folder_); }

  static std::string content(const fs::path& path) {
    std::ifstream file(path, std::ios::binary);
    return {std::istreambuf_iterator<char>(file), {}};
  }

  fs::path folder_;
};

TEST_F(ReplaceFile, WritesANewFileAndReplacesAnOldOneWithItsPermissions) {
  const fs::path path = folder_ / "a.yaml";
  ASSERT_TRUE(replace_file(path.string(), "one"));
  EXPECT_EQ(content(path), "one");
  fs::permissions(path, fs::perms::owner_read | fs::perms::owner_write);
  ASSERT_TRUE(replace_file(path.string(), "two, and longer"));
  EXPECT_EQ(content(path), "two, and longer");
  EXPECT_EQ(fs::status(path).permissions(), fs::perms::owner_read | fs::perms::owner_write);
  EXPECT_EQ(std::distance(fs::directory_iterator(folder_), {}), 1);  // nothing is left lying about
}

TEST_F(ReplaceFile, FollowsALink) {
  ASSERT_TRUE(replace_file((folder_ / "real").string(), "old"));
  fs::create_symlink("real", folder_ / "link");
  ASSERT_TRUE(replace_file((folder_ / "link").string(), "new"));
  EXPECT_EQ(content(folder_ / "real"), "new");
  EXPECT_TRUE(fs::is_symlink(folder_ / "link"));
}

TEST_F(ReplaceFile, SaysWhyItCannotAndLeavesTheOldOne) {
  const auto done = replace_file((folder_ / "no" / "such" / "folder").string(), "x");
  ASSERT_FALSE(done);
  EXPECT_THAT(done.error().text(), testing::HasSubstr("No such file or directory"));
  fs::create_directories(folder_ / "taken");
  std::ofstream(folder_ / "taken" / "inside") << "kept";
  EXPECT_FALSE(replace_file((folder_ / "taken").string(), "x"));  // a folder is not replaced by a file
  EXPECT_EQ(content(folder_ / "taken" / "inside"), "kept");
  EXPECT_FALSE(fs::exists(folder_ / "taken.new"));
}

}  // namespace
}  // namespace tramline::tools
