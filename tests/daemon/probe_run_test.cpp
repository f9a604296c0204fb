#include "daemon/probe_run.hpp"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <deque>
#include <nlohmann/json.hpp>
#include <string>

#include "daemon/probe_findings.hpp"
#include "daemon/probe_report.hpp"
#include "tests/daemon/probe_signals.hpp"

namespace tramline {
namespace {

using std::chrono::milliseconds;
using ::testing::HasSubstr;
using testing::household;
using ::testing::Not;
using testing::samples_of;
using testing::Signal;

constexpr double kRate = 6400.0;

/// A live source that takes its time, on the test's clock.
class SlowSource : public acquire::Source {
 public:
  explicit SlowSource(std::chrono::nanoseconds& now) : now_(now), info_(testing::stream(kRate, true)) {}

  [[nodiscard]] const acquire::StreamInfo& info() const override {
    EXPECT_TRUE(ready_) << "nothing may be asked before it is ready";
    return info_;
  }
  Result<bool> ready() override {
    if (fails_to_open) return Error{"box", "refused", "see the box"};
    ready_ = now_ >= connects_at;
    return ready_;
  }
  Result<bool> next(measure::Block& block, std::size_t most_frames) override {
    EXPECT_TRUE(ready_);
    const std::int64_t due = std::min<std::int64_t>(
        falls_silent_after,
        static_cast<std::int64_t>(std::chrono::duration<double>(now_ - connects_at).count() * kRate));
    if (given_ >= fails_after) return Error{"box", "unplugged", "plug it in"};
    if (given_ >= ends_after) return false;
    const auto frames = static_cast<std::size_t>(
        std::clamp<std::int64_t>(due - given_, 0, static_cast<std::int64_t>(most_frames)));
    if (frames == 0) ++empty_blocks;
    block.resize(2, frames);
    block.begin({given_});
    for (std::size_t c = 0; c < 2; ++c) {
      for (std::size_t i = 0; i < frames; ++i)
        block.channel(c)[i] = static_cast<float>(testing::clean_value(
            Signal{}, static_cast<double>(given_ + static_cast<std::int64_t>(i)) / kRate));
    }
    given_ += static_cast<std::int64_t>(frames);
    return true;
  }
  [[nodiscard]] std::string end_remark() const override { return "end of file"; }
  [[nodiscard]] double progress() const override { return 0.0; }

  std::chrono::nanoseconds connects_at{0};
  bool fails_to_open = false;
  std::int64_t falls_silent_after = 1'000'000'000;
  std::int64_t fails_after = 1'000'000'000;
  std::int64_t ends_after = 1'000'000'000;
  int empty_blocks = 0;

 private:
  std::chrono::nanoseconds& now_;
  acquire::StreamInfo info_;
  bool ready_ = false;
  std::int64_t given_ = 0;
};

/// The test's clock moves only when somebody waits.
class ProbeRun : public ::testing::Test {
 protected:
  ProbeRun() {
    pace.steady_now = [this] { return now; };
    pace.pause = [this](milliseconds time) {
      longest_pause = std::max(longest_pause, time);
      now += time;
    };
    pace.progress = [this](double done) { progress.push_back(done); };
  }
  std::chrono::nanoseconds now{1'000'000'000};
  milliseconds longest_pause{0};
  std::deque<double> progress;
  ProbePace pace;
  SlowSource source{now};
};

TEST_F(ProbeRun, WaitsForTheSourceToConnectAndForItsFrames) {
  source.connects_at = now + std::chrono::seconds(9);
  const auto figures = probe_source(household(), source, pace);
  ASSERT_TRUE(figures) << figures.error().text();
  EXPECT_EQ(figures.value().frames, 32000);
  EXPECT_EQ(now, source.connects_at + std::chrono::seconds(5));
  EXPECT_EQ(longest_pause, milliseconds(20));
  EXPECT_GT(source.empty_blocks, 100);
  EXPECT_NEAR(figures.value().channels[0].rms_v, 230.0, 0.01);
  EXPECT_NEAR(figures.value().rate.measured_hz.value(), kRate, 0.01 * kRate);
  EXPECT_TRUE(std::is_sorted(progress.begin(), progress.end()));
  EXPECT_EQ(progress.back(), 1.0);
}

TEST_F(ProbeRun, GivesUpASourceThatDoesNotConnect) {
  source.connects_at = now + std::chrono::hours(1);
  const auto begin = now;
  const auto figures = probe_source(household(), source, pace);
  ASSERT_FALSE(figures);
  EXPECT_THAT(figures.error().text(), HasSubstr("has not connected within 15 s"));
  EXPECT_LT(now - begin, std::chrono::seconds(16));
}

TEST_F(ProbeRun, GivesUpASourceThatFallsSilent) {
  source.falls_silent_after = 10'000;
  const auto begin = now;
  const auto figures = probe_source(household(), source, pace);
  ASSERT_FALSE(figures);
  EXPECT_THAT(figures.error().text(), HasSubstr("nothing has come for 10 s"));
  EXPECT_LT(now - begin, std::chrono::seconds(13));
}

TEST_F(ProbeRun, PassesOnWhatTheSourceSaysOfItsFailure) {
  source.fails_to_open = true;
  EXPECT_THAT(probe_source(household(), source, pace).error().text(), HasSubstr("refused; see the box"));
  source.fails_to_open = false;
  source.fails_after = 6400;
  EXPECT_THAT(probe_source(household(), source, pace).error().text(), HasSubstr("unplugged"));
}

TEST_F(ProbeRun, TakesWhatThereIsOfAShortSource) {
  source.ends_after = 6400;
  const auto figures = probe_source(household(), source, pace);
  ASSERT_TRUE(figures);
  EXPECT_GE(figures.value().frames, 6400);
  EXPECT_LT(figures.value().frames, 8000);
}

TEST_F(ProbeRun, SourceThatEndsWithoutASampleIsAnError) {
  source.ends_after = 0;
  const auto figures = probe_source(household(), source, pace);
  ASSERT_FALSE(figures);
  EXPECT_THAT(figures.error().text(), HasSubstr("without a sample: end of file"));
}

// ---- the report

class ProbeReport : public ::testing::Test {
 protected:
  void probe(const std::vector<Signal>& signals) {
    figures = testing::probed(site, samples_of(signals, 2.0, kRate), kRate);
    findings = judged(site, figures);
    text = probe_text(site, info, figures, findings);
    json = nlohmann::json::parse(probe_json(site, info, figures, findings));
  }
  config::Site site = household();
  acquire::StreamInfo info = testing::stream(kRate);
  ProbeFigures figures;
  std::vector<Finding> findings;
  std::string text;
  nlohmann::json json;
};

TEST_F(ProbeReport, BeginsWithTheCautionsAndEndsWithOneLine) {
  Signal input;
  input.rms_v = 205.0;
  Signal output;
  output.gain = -1.0;
  output.dc_v = 4.0;
  probe({input, output});
  EXPECT_EQ(text.find("Before anyone touches a wire"), 0U);
  for (const char* caution :
       {"Mains voltage kills", "licensed", "local codes", "CAT III", "does not isolate"})
    EXPECT_THAT(text.substr(0, text.find("Fernhollow")), HasSubstr(caution));
  EXPECT_LT(text.find("MUST BE FIXED"), text.find("look at it"));
  EXPECT_THAT(text, HasSubstr("\n\n1 thing must be fixed before anyone trusts this site's figures.\n"));
  EXPECT_THAT(text, Not(HasSubstr("\x1b")));
  EXPECT_THAT(text, Not(HasSubstr("-0.00 ")));
  for (std::size_t at = 0; at < text.size();) {
    const std::size_t end = text.find('\n', at);
    EXPECT_LE(end - at, 96U) << text.substr(at, end - at);
    at = end + 1;
  }
}

TEST_F(ProbeReport, ASoundSiteEndsWithWhatItDoesNotProve) {
  Signal input;
  input.rms_v = 205.0;
  probe({input, Signal{}});
  EXPECT_THAT(
      text,
      HasSubstr(
          "  none\n\nNothing must be fixed. Whether the volts are true only a reference meter can say.\n"));
  EXPECT_THAT(text, HasSubstr("U_out/U_in: 1.1220; in phase"));
  EXPECT_THAT(text, HasSubstr("the true one was not measured"));
}

TEST_F(ProbeReport, JsonHoldsTheFiguresAndNullForWhatWasNotMeasured) {
  Signal input;
  input.rms_v = 205.0;
  Signal dead;
  dead.rms_v = 0.0;
  dead.noise_v = 0.01;
  probe({input, dead});
  EXPECT_NEAR(json["channels"][0]["rms_v"].get<double>(), 205.0, 0.01);
  EXPECT_NEAR(json["channels"][0]["wave"]["frequency_hz"].get<double>(), 50.0, 1e-4);
  EXPECT_TRUE(json["channels"][1]["wave"].is_null());
  EXPECT_TRUE(json["pairs"][0]["skew_deg"].is_null());
  EXPECT_TRUE(json["rate"]["measured_hz"].is_null());
  EXPECT_EQ(json["must_be_fixed"], 1);
  EXPECT_EQ(json["findings"][0]["matter"], "dead");
  EXPECT_EQ(json["findings"][0]["severity"], "must be fixed");
  EXPECT_EQ(json["findings"][0]["channels"], nlohmann::json::array({"output.L1"}));
}

}  // namespace
}  // namespace tramline
