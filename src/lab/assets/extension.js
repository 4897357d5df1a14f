// Rhythmite in JupyterLab and Notebook: colours for the language, and outputs that go on being refreshed after a reload.
//
// This is a module-federation container written by hand, so that it needs no build: the page loads it as a script, calls
// `init` with the modules that it shares, and asks `get("./extension")` for the plugins. Everything works without it,
// too; whatever goes wrong here is said in the browser's console and breaks nothing else.
(() => {
  "use strict";

  // The words of the language, made from its tables when this file is installed.
  const words = __WORDS__;

  const complain = problem => console.warn("rhythmite:", problem);

  /** A function that does what `action` does, but never throws. */
  const guarded = action => (...given) => {
    try {
      return action(...given);
    } catch (problem) {
      complain(problem);
      return undefined;
    }
  };

  // ---------------------------------------------------------------------------------------------- highlighting

  /** The language as a CodeMirror stream parser: which token begins here, and what the next one may be. */
  function streamParser() {
    const reserved = new Set(words.reserved);
    const functions = new Set(words.functions);
    const choices = new Set(words.choices);
    const units = new Set(words.units);
    const eras = new Set(words.eras);
    const literally = text => text.replace(/[.*+?^${}()|[\]\\/-]/g, "\\$&");
    const any = texts => new RegExp("^(?:" + texts.map(literally).join("|") + ")");
    const operator = any(words.operators);
    const punctuation = any(words.punctuation);
    const spacedEra = new RegExp(
      "^(?:" + words.eras.filter(era => era.includes(" ")).map(era => era.replace(" ", "\\s+")).join("|") + ")(?![\\p{L}\\p{Nd}_])",
      "u"
    );
    const date = /^\d{4}-\d{2}-\d{2}(?!\d|-|\.\d)/;
    const number = /^\d+(?:\.\d+)?(?:[eE][+\-−]?\d+)?/;
    const text = /^"(?:\\.|[^"\\])*"?/;
    const name = /^[\p{L}_][\p{L}\p{Nd}\p{M}_]*/u;
    const symbol = "[\\p{L}°%‰][\\p{L}\\p{Nd}\\p{M}_°%‰]*(?:\\^[-−]?\\d+)?";
    // A tight `/` or `*` goes on only before a letter: `W/m2/4` divides.
    const unit = new RegExp(`^(?:1/(?=[\\p{L}°%‰]))?${symbol}(?:[/*]${symbol})*`, "u");

    /** Whether a symbol is a unit: `m`, `m2`, `m^-2`, `µm`, `spots_v2`. */
    const isUnit = written => {
      const plain = written.replace(/\^[-−]?\d+$/, "").replace(/[µμ]/g, "u").replace("°C", "degC");
      return units.has(plain) || units.has(plain.replace(/\d+$/, ""));
    };

    /** A unit or era where one may stand; `undefined` where there is none. */
    const unitToken = stream => {
      if (stream.match(spacedEra)) return "labelName";
      const found = stream.match(unit, false);
      if (!found) return undefined;
      const symbols = found[0].replace(/^1\//, "").split(/[/*]/);
      if (reserved.has(symbols[0])) return undefined;
      stream.match(unit);
      // A unit that does not exist stays plain, which shows the slip.
      return eras.has(found[0]) || symbols.every(isUnit) ? "labelName" : null;
    };

    const wordToken = (stream, state, word, isFirst) => {
      const before = state.before;
      state.before = "other";
      if (reserved.has(word)) {
        if (word === "for") state.before = "for";
        // The list of a loop is no unit: `for e in [2, 3] degC`.
        if (word === "in" && before !== "loop name") state.before = "quantity";
        return "keyword";
      }
      if (before === "for") {
        state.before = "loop name";
        return "variableName.definition";
      }
      if (state.depth > 0 && stream.match(/^\s*:/, false)) {
        state.before = "label";
        return "propertyName";
      }
      if (isFirst && stream.match(/^\s*(?:\([^()]*\)\s*)?=/, false)) return "variableName.definition";
      if (before === "label" && choices.has(word)) return "variableName.special";
      if (stream.match(/^\s*\(/, false)) {
        return functions.has(word) ? "variableName.standard" : "variableName.special";
      }
      return "variableName";
    };

    return {
      name: "rhythmite",
      // `before` is what stood before: "quantity" where a unit may follow, "for", "loop name", "label" or "other".
      startState: () => ({ before: "other", depth: 0, isFirst: true }),
      token(stream, state) {
        if (stream.sol()) {
          state.isFirst = state.depth === 0;
          // A unit stands on the line of its number.
          if (state.before === "quantity") state.before = "other";
        }
        if (stream.eatSpace()) return null;
        if (stream.peek() === "#") {
          stream.skipToEnd();
          return "comment";
        }
        const isFirst = state.isFirst;
        state.isFirst = false;
        if (state.before === "quantity") {
          state.before = "other";
          const found = unitToken(stream);
          if (found !== undefined) return found;
        }
        if (stream.match(date) || stream.match(number)) {
          state.before = "quantity";
          return "number";
        }
        if (stream.match(text)) {
          state.before = "other";
          return "string";
        }
        const word = stream.match(name);
        if (word) return wordToken(stream, state, word[0], isFirst);
        if (stream.match(operator)) {
          state.before = "other";
          return "operator";
        }
        const mark = stream.match(punctuation);
        if (mark) {
          const opens = mark[0] === "(" || mark[0] === "[";
          const closes = mark[0] === ")" || mark[0] === "]";
          state.depth = Math.max(0, state.depth + (opens ? 1 : closes ? -1 : 0));
          // A unit may follow a list; a choice follows the colon of its label.
          if (mark[0] === "]") state.before = "quantity";
          else if (!(mark[0] === ":" && state.before === "label")) state.before = "other";
          return null;
        }
        stream.next();
        state.before = "other";
        return "invalid";
      },
      indent(state, textAfter, context) {
        if (state.depth === 0) return /^\|>/.test(textAfter) ? context.unit : 0;
        return context.unit * (state.depth - (/^[)\]]/.test(textAfter) ? 1 : 0));
      },
      languageData: {
        commentTokens: { line: "#" },
        closeBrackets: { brackets: ["(", "[", '"'] },
        indentOnInput: /^\s*(?:[)\]]|\|>)$/
      }
    };
  }

  function highlighting({ IEditorLanguageRegistry }, { StreamLanguage, LanguageSupport }) {
    return {
      id: "rhythmite:highlighting",
      description: "Colours for the language.",
      autoStart: true,
      requires: [IEditorLanguageRegistry],
      activate: guarded((_app, languages) => {
        languages.addLanguage({
          name: "rhythmite",
          displayName: "Rhythmite",
          mime: "text/x-rhythmite",
          extensions: ["rhy"],
          support: new LanguageSupport(StreamLanguage.define(streamParser()))
        });
      })
    };
  }

  // ------------------------------------------------------------------------------------------------ re-linking
  //
  // The page itself remembers which output has which display id, and forgets it when it is reloaded, when a cell is cut
  // and pasted, or when another page ran the cell. Our kernel writes the id into the metadata of the output too, where
  // it is saved with the notebook, so that the output can be found again.

  const TARGET = "rhythmite.relink";

  /** Whether two JSON values are the same, whatever the order of their keys. */
  function same(one, other) {
    if (one === other) return true;
    if (typeof one !== "object" || typeof other !== "object" || one === null || other === null) return false;
    const keys = Object.keys(one);
    return (
      Array.isArray(one) === Array.isArray(other) &&
      keys.length === Object.keys(other).length &&
      keys.every(key => Object.hasOwn(other, key) && same(one[key], other[key]))
    );
  }

  /** Bring every output of the notebook that shows the display of an update up to date. */
  function refresh(panel, { data, metadata, transient }) {
    const cells = panel.content.model?.cells;
    const display = transient?.display_id;
    if (!cells || typeof display !== "string") return;
    for (let place = 0; place < cells.length; place += 1) {
      const outputs = cells.get(place).outputs;
      if (!outputs) continue; // text cells have none
      for (let index = 0; index < outputs.length; index += 1) {
        const shown = outputs.get(index).toJSON();
        if (shown.metadata?.rhythmite?.display !== display) continue;
        // Where the page has the link still, it was there first.
        if (same(shown.data, data) && same(shown.metadata, metadata)) continue;
        outputs.set(index, { output_type: "display_data", data, metadata });
      }
    }
  }

  /**
   * The page tells kernels which cells were deleted, and counts one that was cut and is pasted again among them: its
   * results would be refreshed no more. Take those that are back from the list.
   */
  function undelete(model, { type, newValues }) {
    if (type !== "add" || !Array.isArray(model.deletedCells)) return;
    for (const { id } of newValues) {
      const place = model.deletedCells.indexOf(id);
      if (place >= 0) model.deletedCells.splice(place, 1);
    }
  }

  /** Watch a notebook: tell its kernel, if it is ours, that old outputs are found again, and find them. */
  function watch(panel) {
    const context = panel.sessionContext;
    let told = null; // the kernel connection that knows
    let comm = null;
    let listening = null; // the model whose cells are listened to

    const tell = async () => {
      const kernel = context.session?.kernel;
      if (!kernel || kernel === told) return;
      told = kernel;
      try {
        const info = await kernel.info;
        // No other kernel ever sees our comm. Meanwhile the kernel may have been changed or begun anew.
        if (info.language_info.name !== "rhythmite" || told !== kernel || kernel.isDisposed) return;
        comm = kernel.createComm(TARGET);
        comm.open({});
        const model = panel.content.model;
        if (!model || listening === model) return;
        listening = model;
        model.cells.changed.connect(guarded((_cells, change) => {
          if (comm && !comm.isDisposed) undelete(model, change);
        }));
      } catch (problem) {
        if (told === kernel) told = null;
        complain(problem);
      }
    };

    context.kernelChanged.connect(guarded(() => {
      told = null;
      comm = null;
      void tell();
    }));
    context.statusChanged.connect(guarded((_context, status) => {
      // A kernel that begins anew has forgotten; the connection to it stays the same object.
      if (["starting", "restarting", "autorestarting", "dead", "terminating"].includes(status)) told = null;
      else if (status === "idle") void tell();
    }));
    context.iopubMessage.connect(guarded((_context, message) => {
      if (message.header.msg_type === "update_display_data") refresh(panel, message.content);
    }));
    panel.disposed.connect(guarded(() => {
      if (comm && !comm.isDisposed && context.session?.kernel) comm.close();
    }));
    void tell();
  }

  function relinking({ INotebookTracker }) {
    return {
      id: "rhythmite:relinking",
      description: "Outputs go on being refreshed after the page was reloaded.",
      autoStart: true,
      // Pages without notebooks have no tracker.
      optional: [INotebookTracker],
      activate: guarded((_app, notebooks) => {
        if (!notebooks) return;
        notebooks.forEach(guarded(watch));
        notebooks.widgetAdded.connect(guarded((_tracker, panel) => watch(panel)));
      })
    };
  }

  // ------------------------------------------------------------------------------------------------- container

  let shared = {};

  /** A module of the page: the version that is loaded, else the newest. */
  async function module(name) {
    const versions = shared[name];
    if (!versions) throw new Error(`this page shares no module ${name}`);
    const newest = (one, other) =>
      Number(Boolean(versions[other].loaded)) - Number(Boolean(versions[one].loaded)) ||
      other.localeCompare(one, "en", { numeric: true });
    const [version] = Object.keys(versions).sort(newest);
    return (await versions[version].get())();
  }

  /** The plugin that `make` makes of some modules, or nothing where one of them is missing. */
  async function plugin(make, ...names) {
    try {
      return [make(...(await Promise.all(names.map(module))))];
    } catch (problem) {
      complain(problem);
      return [];
    }
  }

  window._JUPYTERLAB = window._JUPYTERLAB || {};
  window._JUPYTERLAB.rhythmite = {
    init: scope => {
      shared = scope;
    },
    get: async () => {
      const plugins = await Promise.all([
        plugin(highlighting, "@jupyterlab/codemirror", "@codemirror/language"),
        plugin(relinking, "@jupyterlab/notebook")
      ]);
      const exported = { __esModule: true, default: plugins.flat() };
      return () => exported;
    }
  };
})();
