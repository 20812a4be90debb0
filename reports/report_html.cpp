#include "reports/report_html.h"

#include <QByteArray>
#include <QString>

#include "analysis/number_text.h"
#include "reports/colours.h"

namespace halfmark {

namespace {

// Typography: one column as wide as can be read, quiet rules, no boxes; two type sizes besides the head.
constexpr const char* style = R"(
:root{color-scheme:light}
*{box-sizing:border-box}
body{margin:0;background:#fff;color:#1d262d;font:15px/1.5 "DejaVu Sans","Noto Sans","Liberation Sans",Arial,sans-serif}
main{max-width:60rem;margin:0 auto;padding:2.5rem 2rem 4rem}
header{display:flex;gap:1.4rem;align-items:center;padding-bottom:1.4rem}
header svg{flex:none;width:4.6rem;height:4.6rem}
.word{font-size:2.3rem;font-weight:700;line-height:1.1;letter-spacing:.01em}
.sentence{font-size:1.05rem}
.title{color:#5b6770;margin:0 0 .3rem;font-size:1rem;font-weight:400}
h2{font-size:1.15rem;margin:2.6rem 0 .7rem;padding-top:.7rem;border-top:2px solid #1d262d}
h3{font-size:1rem;margin:1.6rem 0 .4rem}
h3 svg,td svg{width:1.1em;height:1.1em;vertical-align:-.18em;margin-right:.4em}
p{margin:.4rem 0 .8rem;max-width:50rem}
ul{margin:.3rem 0;padding-left:1.2rem;max-width:50rem}
li{margin:.25rem 0}
table{border-collapse:collapse;width:100%;font-size:.87rem;line-height:1.4;font-variant-numeric:tabular-nums}
th{text-align:left;font-weight:600;color:#5b6770;border-bottom:1.5px solid #1d262d;padding:.35rem .9rem .35rem 0;vertical-align:bottom}
td{border-bottom:1px solid #e0e5e8;padding:.45rem .9rem .45rem 0;vertical-align:top;overflow-wrap:anywhere}
th:last-child,td:last-child{padding-right:0}
.n{text-align:right}
td.n{white-space:nowrap}
.note{display:block;color:#5b6770;font-size:.92em;margin-top:.1rem}
.noted td{border-bottom:0;padding-bottom:.1rem}
.under td{color:#5b6770;font-size:.92em;padding-top:0}
.v{white-space:nowrap;font-weight:600}
.two{display:flex;gap:2rem;align-items:flex-start}
.two dl{flex:1;grid-template-columns:9rem 1fr}
dl{display:grid;grid-template-columns:13rem 1fr;margin:.2rem 0;font-size:.9rem;line-height:1.45}
dt{color:#5b6770;padding:.2rem .8rem .2rem 0}
dd{margin:0;padding:.2rem 0;overflow-wrap:anywhere}
.figures{display:flex;gap:1.2rem;margin:.8rem 0 1.2rem;align-items:flex-start}
figure{margin:0;min-width:0}
figure img{display:block;width:100%;height:auto}
figcaption{color:#5b6770;font-size:.82rem;line-height:1.4;margin-top:.4rem}
.sign{display:flex;gap:2.5rem;margin:3.6rem 0 1rem}
.sign div{flex:1;border-top:1px solid #1d262d;padding-top:.3rem;font-size:.85rem;color:#5b6770}
footer{color:#5b6770;font-size:.82rem;margin-top:3rem}
@media (max-width:44rem){.figures,.two{flex-direction:column}.figures figure{width:100%!important}dl{grid-template-columns:1fr}main{padding:1.2rem}}
@media print{body{font-size:10.5pt}main{max-width:none;padding:0}h2,h3{break-after:avoid}figure,tr,.sign{break-inside:avoid}@page{size:A4;margin:16mm}}
)";

// The same three signs as on the pictures.
std::string sign_svg(Verdict v) {
  const std::string open = "<svg viewBox=\"-10 -10 20 20\" aria-hidden=\"true\">";
  const std::string stroke =
      "\" fill=\"none\" stroke=\"#fff\" stroke-width=\"2.2\" stroke-linecap=\"round\" "
      "stroke-linejoin=\"round\"/></svg>";
  const std::string colour = hex(verdict_colour(v));
  if (v == Verdict::accept)
    return open + "<circle r=\"9.5\" fill=\"" + colour + "\"/><path d=\"M-4.2 .5-1 3.8 4.6-3.6" + stroke;
  if (v == Verdict::reject)
    return open + "<rect x=\"-9\" y=\"-9\" width=\"18\" height=\"18\" fill=\"" + colour +
           "\"/><path d=\"M-4-4 4 4M-4 4 4-4" + stroke;
  return open + "<path d=\"M0-9 9.5 8.2H-9.5z\" fill=\"" + colour +
         "\" stroke=\"#1d262d\" stroke-width=\".8\" stroke-linejoin=\"round\"/><path d=\"M-2.2-1.4C-2.2-5 "
         "2.4-4.6 "
         "2.2-1.6 2.1 0 0 .2 0 2.4\" fill=\"none\" stroke=\"#1d262d\" stroke-width=\"1.7\" "
         "stroke-linecap=\"round\"/>"
         "<circle cy=\"5.4\" r=\"1.1\" fill=\"#1d262d\"/></svg>";
}

class HtmlWriter {
 public:
  std::string take() { return std::move(out_); }

  void head(const ReportContent& c) {
    out_ +=
        "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n"
        "<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; img-src data:; "
        "style-src 'unsafe-inline'\">\n"
        "<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n<title>" +
        html_escaped(capitalised(to_text(c.verdict)) + ": " + c.subject +
                     (c.serial.empty() ? "" : ", serial " + c.serial)) +
        "</title>\n<style>" + style + "</style>\n</head>\n<body>\n<main>\n";
    out_ += "<header>" + sign_svg(c.verdict) + "<div><h1 class=\"title\">" + html_escaped(c.title) +
            "</h1><div class=\"word\" style=\"color:" + hex(verdict_line_colour(c.verdict)) + "\">" +
            html_escaped(capitalised(to_text(c.verdict))) + "</div><div class=\"sentence\">" +
            html_escaped(c.sentence) + "</div></div></header>\n";
  }
  void section(const Section& s) {
    out_ += "<section>\n<h2>" + html_escaped(s.heading) + "</h2>\n";
    for (const Block& block : s.blocks) std::visit([this](const auto& b) { write(b); }, block);
    out_ += "</section>\n";
  }
  void foot(const ReportContent& c) {
    out_ += "<footer>Made by " + html_escaped(c.program) + "</footer>\n</main>\n</body>\n</html>\n";
  }

 private:
  void write(const TextBlock& b) { out_ += "<p>" + html_escaped(b.text) + "</p>\n"; }
  void write(const ListBlock& b) {
    out_ += "<ul>\n";
    for (const std::string& item : b.items) out_ += "<li>" + html_escaped(item) + "</li>\n";
    out_ += "</ul>\n";
  }
  void write(const FactsBlock& b) {
    if (b.in_two_columns) {
      const auto middle = b.facts.begin() + static_cast<std::ptrdiff_t>((b.facts.size() + 1) / 2);
      out_ += "<div class=\"two\">\n";
      facts(b.facts.begin(), middle);
      facts(middle, b.facts.end());
      out_ += "</div>\n";
    } else {
      facts(b.facts.begin(), b.facts.end());
    }
  }
  using Fact = std::vector<std::pair<std::string, std::string>>::const_iterator;
  void facts(Fact from, Fact to) {
    out_ += "<dl>\n";
    for (; from != to; ++from)
      out_ += "<dt>" + html_escaped(from->first) + "</dt><dd>" + html_escaped(from->second) + "</dd>\n";
    out_ += "</dl>\n";
  }
  void write(const TableBlock& b) {
    out_ += "<table>\n<colgroup>";
    for (const double share : b.shares) out_ += "<col style=\"width:" + number_text(100 * share) + "%\">";
    out_ += "</colgroup>\n<thead><tr>";
    for (const Cell& cell : b.header)
      out_ += std::string("<th scope=\"col\"") + (cell.number ? " class=\"n\">" : ">") +
              html_escaped(cell.text) + "</th>";
    out_ += "</tr></thead>\n<tbody>\n";
    for (std::size_t i = 0; i < b.rows.size(); ++i) {
      const bool noted = i < b.notes.size() && !b.notes[i].empty();
      out_ += noted ? "<tr class=\"noted\">" : "<tr>";
      for (const Cell& cell : b.rows[i]) write(cell);
      out_ += "</tr>\n";
      if (noted)
        out_ += "<tr class=\"under\"><td></td><td colspan=\"" + std::to_string(b.rows[i].size() - 1) + "\">" +
                html_escaped(b.notes[i]) + "</td></tr>\n";
    }
    out_ += "</tbody>\n</table>\n";
  }
  void write(const Cell& cell) {
    if (cell.verdict) {
      out_ += "<td class=\"v\">" + sign_svg(*cell.verdict) + html_escaped(cell.text) + "</td>";
      return;
    }
    out_ += std::string("<td") + (cell.number ? " class=\"n\">" : ">") + html_escaped(cell.text);
    if (!cell.note.empty()) out_ += "<span class=\"note\">" + html_escaped(cell.note) + "</span>";
    out_ += "</td>";
  }
  void write(const FigureBlock& b) {
    out_ += "<div class=\"figures\">\n";
    for (std::size_t i = 0; i < b.figures.size(); ++i) {
      const Figure& f = b.figures[i];
      const QByteArray base64 =
          QByteArray::fromRawData(f.picture.png.data(), static_cast<qsizetype>(f.picture.png.size()))
              .toBase64();
      out_ += "<figure style=\"width:" + number_text(100 * b.shares[i]) + "%\"><img width=\"" +
              std::to_string(f.picture.width) + "\" height=\"" + std::to_string(f.picture.height) +
              "\" alt=\"" + html_escaped(f.description) + "\" src=\"data:image/png;base64,";
      out_.append(base64.constData(), static_cast<std::size_t>(base64.size()));
      out_ += "\"><figcaption>" + html_escaped(f.caption) + "</figcaption></figure>\n";
    }
    out_ += "</div>\n";
  }
  void write(const SubheadingBlock& b) {
    out_ += "<h3>" + (b.verdict ? sign_svg(*b.verdict) : "") + html_escaped(b.text) + "</h3>\n";
  }
  void write(const SignatureBlock& b) {
    out_ += "<div class=\"sign\">";
    for (const std::string& line : b.lines) out_ += "<div>" + html_escaped(line) + "</div>";
    out_ += "</div>\n";
  }

  std::string out_;
};

}  // namespace

std::string html_escaped(const std::string& text) {
  // Through QString and back: what is not UTF-8 is replaced, so that no broken byte can swallow a quote.
  const std::string sound = QString::fromUtf8(text.data(), static_cast<qsizetype>(text.size())).toStdString();
  std::string out;
  for (const char c : sound) {
    switch (c) {
      case '&':
        out += "&amp;";
        break;
      case '<':
        out += "&lt;";
        break;
      case '>':
        out += "&gt;";
        break;
      case '"':
        out += "&quot;";
        break;
      case '\'':
        out += "&#39;";
        break;
      case '\0':
        break;
      default:
        out += c;
    }
  }
  return out;
}

std::string report_to_html(const ReportContent& content) {
  HtmlWriter writer;
  writer.head(content);
  for (const Section& section : content.sections) writer.section(section);
  writer.foot(content);
  return writer.take();
}

}  // namespace halfmark
