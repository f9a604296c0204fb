#include <iostream>
#include <memory>

#include "tools/commands.hpp"
#include "tools/question.hpp"
#include "tools/verdict.hpp"

namespace tramline::tools {

void add_verdict(CLI::App& app, ExitStatus& status) {
  CLI::App* command =
      app.add_subcommand("verdict", "Did the regulator hold its band, and if not, who is to blame?");
  auto question = std::make_shared<Question>();
  question->add_to(*command);
  command->callback([question, &status] {
    const auto evidence = gather(question->logbook, question->from, question->to);
    if (!evidence) {
      status = tell(evidence.error(), ExitStatus::wrong_usage);
      return;
    }
    const VerdictFigures figures = verdict_figures(evidence.value());
    std::cout << (question->json ? verdict_json(evidence.value(), figures)
                                 : verdict_text(evidence.value(), figures));
    status = figures.answer == Answer::not_held ? ExitStatus::answered_bad : ExitStatus::answered;
  });
}

}  // namespace tramline::tools
