#include "daemon/acquire/iio_setup.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cerrno>
#include <string>

namespace tramline::acquire {
namespace {

using testing::HasSubstr;

TEST(IioTrouble, SaysWhatToDoAboutEachFault) {
  struct Row {
    int error;
    const char* remedy_here;
    const char* remedy_there;
  };
  for (const Row& row : {
           Row{EACCES, R"(SUBSYSTEM=="iio", GROUP="tramline", MODE="0660")", "libiio server"},
           Row{EPERM, R"(SUBSYSTEM=="iio", GROUP="tramline", MODE="0660")", "libiio server"},
           Row{EBUSY, "another program captures from it", "another program captures from it"},
           Row{ENODEV, "plugged in", "plugged in"},
           Row{EIO, "plugged in", "plugged in"},
           Row{EPIPE, "iiod", "iiod"},
           Row{ECONNREFUSED, "iiod", "iiod"},
           Row{ETIMEDOUT, "trigger", "network"},
       }) {
    SCOPED_TRACE(row.error);
    const Error here = iio_trouble({"local:", "adc (iio:device0)"}, "the capture broke off", row.error);
    EXPECT_EQ(here.where, "adc (iio:device0) on local:");
    EXPECT_THAT(here.what, HasSubstr("the capture broke off: "));
    EXPECT_THAT(here.remedy, HasSubstr(row.remedy_here));
    const Error there = iio_trouble({"ip:192.0.2.1", ""}, "it cannot be reached", row.error);
    EXPECT_EQ(there.where, "ip:192.0.2.1");
    EXPECT_THAT(there.remedy, HasSubstr(row.remedy_there));
  }
}

}  // namespace
}  // namespace tramline::acquire
