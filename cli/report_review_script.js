// Overruling: decisions are gathered here and saved as a file for the run sheet. Nothing leaves the page otherwise.
(function () {
  'use strict';
  var part = document.getElementById('overrule');
  if (!part) return;
  var columns = ['action', 'droplet', 'time_s', 'x_px', 'y_px', 'cut_s', 'other_droplet', 'other_time_s', 'other_x_px',
    'other_y_px', 'reason', 'name', 'date', 'recording_sha256'];
  var entries = [];
  var unsaved = false;

  function field(name) { return document.getElementById('review-' + name); }
  function say(text) { field('status').textContent = text; }
  function option(select) { return select.options[select.selectedIndex]; }

  function from(data) { // dataset of an entry given, or of an option
    return { droplet: data.number, time_s: data.timeS, x_px: data.xPx, y_px: data.yPx };
  }

  function withOther(entry, data) {
    entry.other_droplet = data.number;
    entry.other_time_s = data.timeS;
    entry.other_x_px = data.xPx;
    entry.other_y_px = data.yPx;
    return entry;
  }

  function given(data) {
    var entry = from(data);
    ['action', 'reason', 'name', 'date'].forEach(function (key) { entry[key] = data[key]; });
    if (data.cutS) entry.cut_s = data.cutS;
    if (data.otherNumber)
      withOther(entry, { number: data.otherNumber, timeS: data.otherTimeS, xPx: data.otherXPx, yPx: data.otherYPx });
    return entry;
  }

  function words(entry) {
    var what = entry.action + ' droplet ' + entry.droplet;
    if (entry.cut_s) what += ' at ' + entry.cut_s + ' s';
    if (entry.other_droplet) what += ' with droplet ' + entry.other_droplet;
    return what;
  }

  function show() {
    var list = field('list');
    list.textContent = '';
    entries.forEach(function (entry, i) {
      var item = document.createElement('li');
      var remove = document.createElement('button');
      item.append(words(entry) + ' (' + entry.name + (entry.date ? ', ' + entry.date : '') + '): ' + entry.reason + ' ');
      remove.type = 'button';
      remove.textContent = 'Take back';
      remove.setAttribute('aria-label', 'Take back: ' + words(entry));
      remove.addEventListener('click', function () { takeBack(i); });
      item.append(remove);
      list.append(item);
    });
    if (entries.length === 0) {
      var none = document.createElement('li');
      none.className = 'soft';
      none.textContent = 'none yet';
      list.append(none);
    }
  }

  function takeBack(i) {
    say('Taken back: ' + words(entries.splice(i, 1)[0]) + '. Not saved yet.');
    unsaved = true;
    show();
    field('list-heading').focus();
  }

  function fit() { // only the lines that the decision needs
    var action = field('action').value;
    var droplet = option(field('droplet')).dataset;
    field('cut-line').hidden = action !== 'cut';
    field('cut').required = action === 'cut';
    field('other-line').hidden = action !== 'join';
    field('other').required = action === 'join';
    field('cut-hint').textContent = droplet.number ? 'it is in view from ' + droplet.startS + ' to ' + droplet.endS + ' s' : '';
  }

  function objection(action, droplet, other) { // or ''
    var cut_s = Number(field('cut').value);
    if (action === 'set aside' && droplet.accepted === '0') return 'Droplet ' + droplet.number + ' is set aside already.';
    if (action === 'restore' && droplet.restorable === '0')
      return droplet.accepted === '0' ? 'Droplet ' + droplet.number + ' has no charge that could be accepted.'
        : 'Droplet ' + droplet.number + ' is accepted already.';
    if (action === 'cut' && !(cut_s > Number(droplet.startS) && cut_s < Number(droplet.endS)))
      return 'Droplet ' + droplet.number + ' is in view from ' + droplet.startS + ' to ' + droplet.endS + ' s: the cut must lie between.';
    if (action === 'join' && droplet.number === other.number) return 'Joining takes two droplets.';
    if (action === 'join' && Number(droplet.endS) >= Number(other.startS) && Number(other.endS) >= Number(droplet.startS))
      return 'Droplets ' + droplet.number + ' and ' + other.number + ' are in view at the same time: they aren’t one.';
    return '';
  }

  function add(event) {
    event.preventDefault();
    var action = field('action').value;
    var droplet = option(field('droplet')).dataset;
    var other = option(field('other')).dataset;
    var no = objection(action, droplet, other);
    if (no) return say(no);
    var entry = from(droplet);
    entry.action = action;
    if (action === 'cut') entry.cut_s = field('cut').value;
    if (action === 'join') withOther(entry, other);
    entry.reason = field('reason').value.trim();
    entry.name = field('name').value.trim();
    if (!entry.reason || !entry.name) return say('A reason and a name are needed.');
    entry.date = new Date().toISOString().slice(0, 16).replace('T', ' ') + ' UTC';
    entries.push(entry);
    unsaved = true;
    field('reason').value = '';
    show();
    say('Added: ' + words(entry) + '. Not saved yet.');
  }

  // Quotes round every cell with words in it; a byte-order mark and CRLF, for spreadsheets.
  function text() {
    var rows = entries.map(function (entry) {
      return columns.map(function (column) {
        var cell = column === 'recording_sha256' ? part.dataset.recording : entry[column] || '';
        return /^[-\w.]*$/.test(cell) ? cell : '"' + cell.replace(/"/g, '""') + '"';
      }).join(',');
    });
    return '\uFEFF' + [columns.join(',')].concat(rows).join('\r\n') + '\r\n';
  }

  function save() {
    var link = document.createElement('a');
    link.href = URL.createObjectURL(new Blob([text()], { type: 'text/csv' }));
    link.download = part.dataset.file;
    document.body.append(link);
    link.click();
    link.remove();
    unsaved = false;
    say('Saved as ' + link.download + ' where your browser puts downloads.');
  }

  Array.from(field('droplet').options).forEach(function (one) { field('other').add(one.cloneNode(true)); });
  document.querySelectorAll('#review-given li').forEach(function (item) { entries.push(given(item.dataset)); });
  field('form').addEventListener('submit', add);
  field('form').addEventListener('change', fit);
  field('save').addEventListener('click', save);
  document.addEventListener('droplet-chosen', function (event) {
    if (event.detail === null) return;
    field('droplet').value = event.detail;
    fit();
  });
  window.addEventListener('beforeunload', function (event) { if (unsaved) event.preventDefault(); });
  var way = document.createElement('a');
  way.href = '#overrule';
  way.textContent = 'Overrule …';
  way.addEventListener('click', function () { document.dispatchEvent(new CustomEvent('make-room')); });
  document.querySelector('#chosen button').before(way);
  var marked = document.querySelector('tr.is-chosen[id^="droplet-"]'); // by the page's address, before this was listening
  if (marked) field('droplet').value = marked.dataset.droplet;
  part.hidden = false;
  fit();
  show();
})();
