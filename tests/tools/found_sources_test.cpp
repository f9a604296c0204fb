#include "tools/found_sources.hpp"

#include <gtest/gtest.h>

#include <filesystem>
#include <fstream>
#include <string>

namespace tramline::tools {
namespace {

namespace fs = std::filesystem;

class FoundSources : public ::testing::Test {
 protected:
  FoundSources()
      : root_(fs::path(::testing::TempDir()) /
              ("found_sources_" +
               std::string(::testing::UnitTest::GetInstance()->current_test_info()->name()))) {
    fs::remove_all(root_);
    fs::create_directories(root_);
  }
  ~FoundSources() override { fs::remove_all(root_); }

  void file(const std::string& path, const std::string& text = "") {
    fs::create_directories((root_ / path).parent_path());
    std::ofstream(root_ / path) << text;
  }
  [[nodiscard]] std::vector<std::string> lines() const {
    std::vector<std::string> lines;
    for (const FoundSource& source : found_sources(root_.string()))
      lines.push_back(source.kind + " " + source.device + " | " + source.what);
    return lines;
  }
  fs::path root_;
};

TEST_F(FoundSources, NothingIsFoundWhereNothingIs) {
  EXPECT_EQ(lines(), std::vector<std::string>{});
}

TEST_F(FoundSources, SerialPortsHaveTheirLastingNameAndAreNamedOnce) {
  file("dev/ttyACM0");
  file("dev/ttyACM1");
  file("dev/ttyUSB0");
  file("dev/ttyS0");
  file("dev/null");
  fs::create_directories(root_ / "dev/serial/by-id");
  fs::create_symlink("../../ttyACM1", root_ / "dev/serial/by-id/usb-board_17-if00");
  EXPECT_EQ(lines(), (std::vector<std::string>{"serial /dev/serial/by-id/usb-board_17-if00 | now ttyACM1",
                                               "serial /dev/ttyACM0 | a USB serial port",
                                               "serial /dev/ttyUSB0 | a USB serial port"}));
}

TEST_F(FoundSources, ConvertersAreNamedByTheirChipUnlessTwoShareTheName) {
  file("sys/bus/iio/devices/iio:device0/name", "ad7606\n");
  file("sys/bus/iio/devices/iio:device1/name", "ad7606\n");
  file("sys/bus/iio/devices/iio:device2/other");
  file("sys/bus/iio/devices/trigger0/name", "timer\n");
  EXPECT_EQ(lines(), (std::vector<std::string>{"iio ad7606 | ad7606, iio:device0",
                                               "iio iio:device1 | ad7606, iio:device1",
                                               "iio iio:device2 | an IIO device"}));
}

TEST_F(FoundSources, SoundInterfacesAreReadFromTheListOfCards) {
  file("proc/asound/cards",
       " 0 [PCH            ]: HDA-Intel - Board sound\n"
       "                      Board sound at 0xf7f10000 irq 35\n"
       " 2 [CODEC          ]: USB-Audio - USB interface - two inputs\n"
       "                      at usb-0000:00:14.0-1, full speed\n");
  EXPECT_EQ(lines(), (std::vector<std::string>{"sound hw:CARD=PCH | Board sound",
                                               "sound hw:CARD=CODEC | USB interface - two inputs"}));
}

TEST_F(FoundSources, MachineWithoutCardsHasNone) {
  file("proc/asound/cards", "--- no soundcards ---\n");
  EXPECT_EQ(lines(), std::vector<std::string>{});
}

}  // namespace
}  // namespace tramline::tools
