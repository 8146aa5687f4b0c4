// Footage: choosing a droplet plays its stretch with its path over the frames; a moment (a switch, a step, a hand timing)
// opens frame by frame. What is drawn follows the frame that the browser says it shows, never the one asked for.
(function () {
  'use strict';
  var source = document.getElementById('film-data');
  if (!source) return;
  var film = JSON.parse(source.textContent);
  var times = film['time_0.1ms'];
  var player = document.getElementById('player');
  var find = function (query) { return player.querySelector(query); };
  var video = find('video'), stage = find('.stage'), svg = find('svg'), ring = find('.ring'), label = find('svg text');
  var seek = find('input'), select = find('select'), play = find('.play'), closeUp = find('.close-up');
  var view = svg.viewBox.baseVal;
  var droplet = null, moment = null, first = 0, last = 0, shown = 0, target = 0, opener = null;
  document.documentElement.classList.add('has-film');

  // ---- which frame ----

  function frameAt(ms) { // the film's frame on show at that time
    var low = 0, high = film.ms.length - 1;
    while (low < high) {
      var middle = (low + high + 1) >> 1;
      if (film.ms[middle] <= ms + 1) low = middle; else high = middle - 1;
    }
    return low;
  }
  function middleOf(i) { // a time, in s, at which nothing but frame i is on show
    return (film.ms[i] + Math.min(i + 1 < film.ms.length ? film.ms[i + 1] - film.ms[i] : 20, 20) / 2) / 1000;
  }
  function placeOf(number, i) {
    var runs = film.droplets[number] || [];
    for (var k = 0; k < runs.length; k++) {
      var at = 2 * (i - runs[k][0]) + 1;
      if (at > 0 && at < runs[k].length) return { x: runs[k][at] / 10, y: runs[k][at + 1] / 10 };
    }
    return null;
  }
  function stretchOf(number) { // its longest run of frames without a cut in time
    var best = null;
    (film.droplets[number] || []).forEach(function (run) {
      var end = run[0] + (run.length - 1) / 2 - 1, start = run[0];
      for (var i = start; i <= end; i++) {
        var isCut = i === end || times[i + 1] - times[i] > 10000;
        if (!isCut) continue;
        if (!best || film.ms[i] - film.ms[start] > film.ms[best.last] - film.ms[best.first]) best = { first: start, last: i };
        start = i + 1;
      }
    });
    return best;
  }
  function fieldAt(time) {
    var name = null;
    film.field.forEach(function (entry) { if (entry[0] <= time) name = entry[1]; });
    return name;
  }

  // ---- what is drawn ----

  function drawPaths() {
    var group = find('.paths');
    group.textContent = '';
    var numbers = droplet ? [droplet] : Object.keys(film.droplets);
    numbers.forEach(function (number) {
      var path = document.getElementById('path-' + number);
      if (!path) return;
      var use = document.createElementNS(svg.namespaceURI, 'use');
      use.setAttribute('href', '#path-' + number);
      group.appendChild(use);
    });
  }
  function drawCloseUp(place) {
    var isThere = Boolean(place) && video.readyState >= 2;
    closeUp.hidden = !isThere;
    if (!isThere) return;
    var scale = video.videoWidth / view.width, side = closeUp.width / 4;
    var context = closeUp.getContext('2d');
    context.imageSmoothingEnabled = false;
    context.fillStyle = '#0d1112';
    context.fillRect(0, 0, closeUp.width, closeUp.height);
    context.drawImage(video, (place.x + 0.5) * scale - side / 2, (place.y + 0.5) * scale - side / 2, side, side,
      0, 0, closeUp.width, closeUp.height);
    var isRight = place.x > view.width / 2, isLow = place.y > view.height / 2;
    closeUp.className = 'close-up' + (isRight ? ' is-left' : '') + (isLow ? ' is-high' : '');
  }
  function draw() {
    var place = droplet && placeOf(droplet, shown), size = view.height / 30;
    ring.style.display = label.style.display = place ? '' : 'none';
    if (place) {
      ring.setAttribute('cx', place.x); ring.setAttribute('cy', place.y); ring.setAttribute('r', size / 2);
      label.setAttribute('x', Math.min(place.x + size * 0.7, view.width - size * 1.6));
      label.setAttribute('y', Math.max(place.y - size * 0.5, size)); label.setAttribute('font-size', size);
      label.textContent = droplet;
    }
    drawCloseUp(place);
    var time = (times[shown] / 10000).toFixed(3), field = fieldAt(times[shown]);
    var text = 'frame ' + film.frame[shown] + ' · ' + time + ' s' + (field ? ' · field ' + field : '');
    if (moment) {
      var off = film.frame[shown] - film.frame[moment.at];
      text += ' · ' + (off === 0 ? 'the frame nearest to it' : Math.abs(off) + (off < 0 ? ' before it' : ' after it'));
    }
    if (droplet && !place) text += ' · not in view here';
    find('.where').textContent = text;
    seek.value = video.paused ? target : shown;
    seek.setAttribute('aria-valuetext', text);
    player.dataset.shown = shown;
  }
  function settle(ms) {
    shown = frameAt(ms);
    if (!video.paused) {
      target = shown;
      if (shown >= last || shown < first) goTo(first);
    }
    draw();
  }
  function goTo(i) { // as fast as the browser can, and to the one asked for last
    target = Math.min(Math.max(i, first), last);
    if (!video.seeking) video.currentTime = middleOf(target);
  }
  function step(by) {
    video.pause();
    goTo(target + by);
  }
  video.addEventListener('seeked', function () {
    if (frameAt(video.currentTime * 1000) !== target && video.paused) goTo(target);
    else settle(video.currentTime * 1000);
  });
  video.addEventListener('loadeddata', draw);
  ['play', 'pause'].forEach(function (name) {
    video.addEventListener(name, function () { play.textContent = video.paused ? 'Play' : 'Pause'; });
  });
  if (video.requestVideoFrameCallback) {
    video.requestVideoFrameCallback(function again(now, about) {
      settle(about.mediaTime * 1000);
      video.requestVideoFrameCallback(again);
    });
  } else {
    video.addEventListener('timeupdate', function () { settle(video.currentTime * 1000); });
  }

  // ---- what to show ----

  function load() {
    if (video.src) return;
    var text = atob(document.getElementById('film').textContent), bytes = new Uint8Array(text.length);
    for (var i = 0; i < text.length; i++) bytes[i] = text.charCodeAt(i);
    video.src = URL.createObjectURL(new Blob([bytes], { type: 'video/webm' }));
  }
  function nameOf(which) {
    if (which.kind === 'switch') return 'switch ' + which.number;
    if (which.kind === 'step') return 'charge step of droplet ' + which.droplet;
    return which.kind + ' of timing ' + which.number;
  }
  function concerns(which) { // of the droplet chosen, or of all droplets while it is in view
    if (!which.filmed) return false;
    return !droplet || String(which.droplet) === droplet || (!which.droplet && placeOf(droplet, which.at) !== null);
  }
  function fillSelect() {
    select.textContent = '';
    select.add(new Option(droplet ? 'droplet ' + droplet : 'all of it', ''));
    film.moments.forEach(function (which, i) { if (concerns(which)) select.add(new Option(nameOf(which), String(i))); });
    select.value = moment ? String(film.moments.indexOf(moment)) : '';
  }
  function show(range, at, isPlaying) {
    load();
    first = range.first; last = range.last;
    seek.min = first; seek.max = last;
    stage.hidden = false;
    drawPaths();
    fillSelect();
    find('.what').textContent = moment ? nameOf(moment).replace(/^./, function (c) { return c.toUpperCase(); }) :
      droplet ? 'Droplet ' + droplet : 'The footage';
    player.hidden = false;
    video.pause();
    goTo(at);
    draw();
    if (isPlaying && !window.matchMedia('(prefers-reduced-motion: reduce)').matches) {
      var promise = video.play();
      if (promise) promise.catch(function () {}); // a browser that forbids it leaves the button
    }
  }
  function showDroplet() {
    var range = droplet ? stretchOf(droplet) : { first: 0, last: film.ms.length - 1 };
    moment = null;
    if (range) { show(range, range.first, true); return; }
    video.pause();
    first = last = 0;
    stage.hidden = true;
    fillSelect();
    find('.what').textContent = 'Droplet ' + droplet;
    find('.where').textContent = 'has no footage in this page: the recording is too long, or it was in view too briefly.';
    player.hidden = false;
  }
  function showMoment(which) {
    moment = which;
    show({ first: which.first, last: which.last }, which.at, false);
  }
  function close() {
    video.pause();
    player.hidden = true;
    if (opener && document.contains(opener)) opener.focus();
    opener = null;
  }

  document.addEventListener('droplet-chosen', function (event) {
    droplet = event.detail;
    if (droplet === null) close(); else showDroplet();
  });
  document.addEventListener('click', function (event) {
    var button = event.target.closest('.look');
    if (!button) return;
    opener = button;
    if (button.dataset.moment === undefined) {
      document.dispatchEvent(new CustomEvent('choose-droplet', { detail: null }));
      opener = button;
      droplet = null;
      showDroplet();
    } else {
      var which = film.moments[Number(button.dataset.moment)];
      if (which.droplet) document.dispatchEvent(new CustomEvent('choose-droplet', { detail: String(which.droplet) }));
      showMoment(which);
    }
    seek.focus();
  });
  select.addEventListener('change', function () {
    if (select.value === '') showDroplet(); else showMoment(film.moments[Number(select.value)]);
  });
  seek.addEventListener('input', function () { video.pause(); goTo(Number(seek.value)); });
  find('.back').addEventListener('click', function () { step(-1); });
  find('.on').addEventListener('click', function () { step(1); });
  find('.close').addEventListener('click', close);
  document.addEventListener('make-room', function () { // on a narrow screen the player would lie over the form
    if (window.innerWidth < 704) close();
  });
  find('.size').addEventListener('click', function () {
    var isLarge = player.classList.toggle('is-large');
    this.setAttribute('aria-pressed', String(isLarge));
    this.textContent = isLarge ? 'Smaller' : 'Larger';
  });
  function toggle() { if (video.paused) video.play(); else video.pause(); }
  play.addEventListener('click', toggle);
  player.addEventListener('keydown', function (event) {
    if (event.target === select) return;
    if (event.key === 'ArrowLeft' || event.key === 'ArrowRight') {
      step(event.key === 'ArrowLeft' ? -1 : 1);
      event.preventDefault();
    } else if (event.key === ' ' && event.target === seek) {
      toggle();
      event.preventDefault();
    }
  });
})();
