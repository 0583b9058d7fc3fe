#include "text_layout.h"

#include <algorithm>
#include <sstream>
#include <utility>

namespace coldpin::report {

std::size_t width_of(const std::string& text) {
    return static_cast<std::size_t>(std::count_if(
        text.begin(), text.end(), [](char c) { return (static_cast<unsigned char>(c) & 0xC0U) != 0x80U; }));
}

std::string wrapped(const std::string& text, int width, const std::string& first_indent,
                    const std::string& indent) {
    std::istringstream words(text);
    std::string out, line = first_indent, word;
    bool empty = true;
    while (words >> word) {
        if (!empty && width_of(line) + 1 + width_of(word) > static_cast<std::size_t>(width)) {
            out += line + "\n";
            line = indent;
            empty = true;
        }
        line += (empty ? "" : " ") + word;
        empty = false;
    }
    return out + line + "\n";
}

Table::Table(std::vector<std::string> header, std::vector<std::size_t> hidden_columns)
    : header_(std::move(header)), hidden_(std::move(hidden_columns)) {}

void Table::align_right(std::size_t column) {
    right_.push_back(column);
}

void Table::row(std::vector<std::string> cells) {
    cells.resize(header_.size());
    rows_.push_back({std::move(cells), false, ""});
}

void Table::heading(const std::string& text) {
    rows_.push_back({{text}, true, ""});
}

void Table::colour_last(const std::string& code) {
    rows_.back().colour = code;
}

bool Table::hidden(std::size_t column) const {
    return std::find(hidden_.begin(), hidden_.end(), column) != hidden_.end();
}

std::string Table::text(const std::string& indent, bool colour) const {
    std::vector<std::size_t> widths;
    for (const auto& title : header_) widths.push_back(width_of(title));
    for (const auto& row : rows_) {
        if (row.is_heading) continue;
        for (std::size_t c = 0; c < row.cells.size(); ++c)
            widths[c] = std::max(widths[c], width_of(row.cells[c]));
    }
    const auto line = [&](const std::vector<std::string>& cells, const std::string& last_code) {
        std::string out = indent;
        std::size_t last = header_.size() - 1;
        for (std::size_t c = 0; c < header_.size(); ++c) {
            if (hidden(c) || widths[c] == 0) continue;
            const std::string pad(widths[c] - width_of(cells[c]), ' ');
            const bool right = std::find(right_.begin(), right_.end(), c) != right_.end();
            std::string cell = right ? pad + cells[c] : cells[c];
            if (c == last && colour && !last_code.empty())
                cell.insert(0, "\033[" + last_code + "m").append("\033[0m");
            out += cell;
            if (c == last) continue;
            if (!right) out += pad;
            out += "   ";
        }
        while (!out.empty() && out.back() == ' ') out.pop_back();
        return out + "\n";
    };
    std::string out = colour ? "\033[2m" + line(header_, "") + "\033[0m" : line(header_, "");
    for (const auto& row : rows_)
        out += row.is_heading ? "\n" + indent + row.cells.front() + "\n" : line(row.cells, row.colour);
    return out;
}

}  // namespace coldpin::report
