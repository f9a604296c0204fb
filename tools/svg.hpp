#pragma once

#include <string>
#include <string_view>
#include <utility>
#include <vector>

namespace tramline::tools {

/// A drawing in SVG: dark lines on white, readable in grey and without colour. Lengths in CSS pixels; text is
/// escaped. Build it up, then take `finish()` once.
class Svg {
 public:
  struct Stroke {
    std::string_view colour = "#222";
    double width = 1.0;
    std::string_view dashes = "";  ///< SVG dash pattern; empty: solid
  };
  enum class Anchor { start, middle, end };

  /// `title` and `description` are read out by screen readers.
  Svg(double width, double height, std::string_view title, std::string_view description);

  void line(double x1, double y1, double x2, double y2, const Stroke& stroke);
  void polyline(const std::vector<std::pair<double, double>>& points, const Stroke& stroke);
  void rectangle(double x, double y, double width, double height, std::string_view fill,
                 const Stroke* stroke = nullptr);
  void text(double x, double y, std::string_view words, Anchor anchor = Anchor::start, double size = 12.0,
            bool bold = false);

  [[nodiscard]] std::string finish() &&;

 private:
  void put_stroke(const Stroke& stroke);
  std::string body_;
};

/// `text` made safe inside XML and HTML, in content and in quoted attributes. Control characters are dropped.
[[nodiscard]] std::string escaped(std::string_view text);

/// Round figures for an axis from `low` to `high`, about `wanted` of them: multiples of 1, 2 or 5 times a
/// power of ten.
[[nodiscard]] std::vector<double> axis_ticks(double low, double high, int wanted);

}  // namespace tramline::tools
