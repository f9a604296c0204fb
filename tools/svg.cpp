#include "tools/svg.hpp"

#include <spdlog/fmt/fmt.h>

#include <cmath>
#include <iterator>

namespace tramline::tools {

std::string escaped(std::string_view text) {
  std::string safe;
  safe.reserve(text.size());
  for (const char c : text) {
    switch (c) {
      case '&':
        safe += "&amp;";
        break;
      case '<':
        safe += "&lt;";
        break;
      case '>':
        safe += "&gt;";
        break;
      case '"':
        safe += "&quot;";
        break;
      case '\'':
        safe += "&#39;";
        break;
      default:
        if (static_cast<unsigned char>(c) >= 0x20 || c == '\n' || c == '\t') safe += c;
    }
  }
  return safe;
}

std::vector<double> axis_ticks(double low, double high, int wanted) {
  std::vector<double> ticks;
  if (!(high > low) || wanted < 1) return ticks;
  const double rough = (high - low) / wanted;
  const double power = std::pow(10.0, std::floor(std::log10(rough)));
  const double mantissa = rough / power;
  const double step = power * (mantissa <= 1.0 ? 1.0 : mantissa <= 2.0 ? 2.0 : mantissa <= 5.0 ? 5.0 : 10.0);
  const auto first = static_cast<long>(std::ceil(low / step - 1e-9));
  const auto last = static_cast<long>(std::floor(high / step + 1e-9));
  for (long i = first; i <= last; ++i)
    ticks.push_back(static_cast<double>(i) * step);
  return ticks;
}

Svg::Svg(double width, double height, std::string_view title, std::string_view description) {
  fmt::format_to(std::back_inserter(body_),
                 "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {0:.0f} {1:.0f}\" "
                 "width=\"{0:.0f}\" height=\"{1:.0f}\" "
                 "role=\"img\" font-family=\"Helvetica, Arial, sans-serif\" "
                 "fill=\"#222\">\n<title>{2}</title>\n<desc>{3}</desc>\n",
                 width, height, escaped(title), escaped(description));
  rectangle(0, 0, width, height, "#fff");
}

void Svg::put_stroke(const Stroke& stroke) {
  fmt::format_to(std::back_inserter(body_), " stroke=\"{}\" stroke-width=\"{:.2f}\"", stroke.colour,
                 stroke.width);
  if (!stroke.dashes.empty())
    fmt::format_to(std::back_inserter(body_), " stroke-dasharray=\"{}\"", stroke.dashes);
}

void Svg::line(double x1, double y1, double x2, double y2, const Stroke& stroke) {
  fmt::format_to(std::back_inserter(body_), "<line x1=\"{:.1f}\" y1=\"{:.1f}\" x2=\"{:.1f}\" y2=\"{:.1f}\"",
                 x1, y1, x2, y2);
  put_stroke(stroke);
  body_ += "/>\n";
}

void Svg::polyline(const std::vector<std::pair<double, double>>& points, const Stroke& stroke) {
  body_ += "<polyline fill=\"none\" stroke-linejoin=\"round\"";
  put_stroke(stroke);
  body_ += " points=\"";
  for (const auto& [x, y] : points)
    fmt::format_to(std::back_inserter(body_), "{:.1f},{:.1f} ", x, y);
  body_ += "\"/>\n";
}

void Svg::rectangle(double x, double y, double width, double height, std::string_view fill,
                    const Stroke* stroke) {
  fmt::format_to(std::back_inserter(body_),
                 "<rect x=\"{:.1f}\" y=\"{:.1f}\" width=\"{:.1f}\" height=\"{:.1f}\" fill=\"{}\"", x, y,
                 width, height, fill);
  if (stroke != nullptr) put_stroke(*stroke);
  body_ += "/>\n";
}

void Svg::text(double x, double y, std::string_view words, Anchor anchor, double size, bool bold) {
  const char* place = anchor == Anchor::start ? "start" : anchor == Anchor::middle ? "middle" : "end";
  fmt::format_to(std::back_inserter(body_),
                 "<text x=\"{:.1f}\" y=\"{:.1f}\" font-size=\"{:.0f}\" text-anchor=\"{}\"{}>{}</text>\n", x,
                 y, size, place, bold ? " font-weight=\"bold\"" : "", escaped(words));
}

std::string Svg::finish() && {
  body_ += "</svg>\n";
  return std::move(body_);
}

}  // namespace tramline::tools
