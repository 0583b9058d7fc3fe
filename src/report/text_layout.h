// Aligned columns and wrapped sentences for terminals, counting characters rather than bytes.
#pragma once

#include <cstddef>
#include <string>
#include <vector>

namespace coldpin::report {

// Characters of a UTF-8 text without combining marks or wide characters, which sheets do not use.
std::size_t width_of(const std::string& text);

// Words wrapped at `width` columns, ending in a newline.
std::string wrapped(const std::string& text, int width, const std::string& first_indent,
                    const std::string& indent);

class Table {
  public:
    Table(std::vector<std::string> header, std::vector<std::size_t> hidden_columns);
    void align_right(std::size_t column);
    void row(std::vector<std::string> cells);
    void heading(const std::string& text);      // a line across all columns
    void colour_last(const std::string& code);  // ANSI code for the last cell of the last row
    std::size_t rows() const { return rows_.size(); }
    std::string text(const std::string& indent, bool colour) const;

  private:
    struct Row {
        std::vector<std::string> cells;
        bool is_heading = false;
        std::string colour;
    };
    bool hidden(std::size_t column) const;
    std::vector<std::string> header_;
    std::vector<std::size_t> hidden_;
    std::vector<std::size_t> right_;
    std::vector<Row> rows_;
};

}  // namespace coldpin::report
